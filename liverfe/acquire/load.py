"""`load_stack`: a plan -> the stack in true values."""

from __future__ import annotations

from liverfe.acquire.plan import LoadedStack, StackPlan
from liverfe.errors import StudyRefused

_LOADABLE = frozenset({"holes-in-echo-table", "no-complete-slice"})
"""Refusals after which pixels may still be read: a caller may decide that the rest suffices."""


def load_stack(plan: StackPlan) -> LoadedStack:
    """Read the pixels of a plan.

    Each file is read once; it is hashed, decoded and scaled from the same bytes, and every image
    is scaled by itself before it is stacked. A plan that is refused for the holes in its table
    may be loaded all the same: its missing images are NaN.

    Parameters
    ----------
    plan : StackPlan
        From `find_stacks`.

    Returns
    -------
    LoadedStack
        The stack, float32, NaN where an image is missing, with all findings; and the files read.

    Raises
    ------
    StudyRefused
        If the plan is refused for more than holes, or a file is damaged, has changed, cannot be
        decoded, holds values outside its declared bits, negative or saturated values, or signal
        that rises.
    """
    stops = [finding for finding in plan.findings if finding.level == "stop"]
    if any(finding.code not in _LOADABLE for finding in stops):
        raise StudyRefused(*stops)
    if plan.origin == "dicom":
        # Late, since each format brings its own library, a third of a second to import.
        from liverfe.acquire.dicom.load import load_dicom  # noqa: PLC0415

        return load_dicom(plan)
    from liverfe.acquire.nifti.load import load_nifti  # noqa: PLC0415

    return load_nifti(plan)
