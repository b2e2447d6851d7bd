"""The one error tree, and `Finding`: doubt as data.

::

    LiverfeError
    ├── UsageError      the call itself is wrong (exit 2)
    ├── StudyRefused    nothing in the study can be trusted; carries stop findings (exit 3)
    └── ResultDiffers   a result folder does not match its manifest (exit 3)

A message says what, where, what was wanted and the remedy; it never says who.
"""

from __future__ import annotations

from dataclasses import dataclass

from liverfe.wording import FINDING_TABLE, Level

__all__ = ["Finding", "Level", "LiverfeError", "ResultDiffers", "StudyRefused", "UsageError"]


class LiverfeError(Exception):
    """Root of all errors that liverfe raises on purpose."""


class UsageError(LiverfeError):
    """The call is wrong: an option, a path or a file of settings. Nothing was read or written."""


class ResultDiffers(LiverfeError):
    """A result folder is not what its manifest says."""


class StudyRefused(LiverfeError):
    """Nothing in this study can be trusted.

    Parameters
    ----------
    *findings : Finding
        At least one of level ``stop``; further notes and cautions may stand beside it.
    """

    findings: tuple[Finding, ...]

    def __init__(self, *findings: Finding) -> None:
        if not any(finding.level == "stop" for finding in findings):
            raise ValueError("StudyRefused needs a finding of level 'stop'")
        self.findings = findings
        stops = [f"{f.text} {f.remedy}" for f in findings if f.level == "stop"]
        super().__init__(" ".join(stops))

    def __reduce__(self) -> tuple[type[StudyRefused], tuple[Finding, ...]]:
        # The default reduction would hand the message, not the findings, to a worker's parent.
        return (type(self), self.findings)


@dataclass(frozen=True, slots=True, kw_only=True)
class Finding:
    """One doubt about a study, as data that report, JSON and screen show alike.

    Attributes
    ----------
    code : str
        Lower-case words with hyphens; a key of `liverfe.wording.FINDING_TABLE`.
    level : {'note', 'caution', 'stop'}
        How much a reader must know of it.
    text : str
        What was found, where, and why it matters.
    remedy : str
        What to do.
    """

    code: str
    level: Level
    text: str
    remedy: str

    def __post_init__(self) -> None:
        if self.code not in FINDING_TABLE:
            raise ValueError(
                f"unknown finding code {self.code!r}: add it to liverfe.wording.findings"
            )

    @classmethod
    def of(cls, code: str, /, **facts: object) -> Finding:
        """Make the finding `code`, its words filled with `facts`.

        Parameters
        ----------
        code : str
            A key of `liverfe.wording.FINDING_TABLE`.
        **facts : object
            One for each ``{name}`` in the finding's text and remedy.

        Returns
        -------
        Finding
            With the level that the table gives.

        Raises
        ------
        KeyError
            If the code is not in the table or a fact is missing.
        """
        entry = FINDING_TABLE[code]
        return cls(
            code=code,
            level=entry.level,
            text=entry.text.format(**facts),
            remedy=entry.remedy.format(**facts),
        )
