"""One study, files in -> result folder out, and what a command line needs to ask for it."""

from liverfe.journey.arguments import read_echo_times
from liverfe.journey.catalogue import describe_curves
from liverfe.journey.choices import choose_method, read_site_curve
from liverfe.journey.clock import Stopwatch, told_duration
from liverfe.journey.configuration import configuration_folder
from liverfe.journey.drawn import find_region_files, kept_regions
from liverfe.journey.estimate import expected_bytes, expected_seconds, free_bytes, told_size
from liverfe.journey.incident import describe_fault
from liverfe.journey.keys import key_of, load_secret, peek_secret
from liverfe.journey.one_study import JourneyOutcome, run_study
from liverfe.journey.preview import inspect_inputs, preview_stacks
from liverfe.journey.progress import Progress, no_progress
from liverfe.journey.settings import Identity, Settings, nearest, resolve_settings
from liverfe.journey.software import software_versions
from liverfe.journey.stack_choice import label_of
from liverfe.journey.studies import StudyFound, find_studies

__all__ = [
    "Identity",
    "JourneyOutcome",
    "Progress",
    "Settings",
    "Stopwatch",
    "StudyFound",
    "choose_method",
    "configuration_folder",
    "describe_curves",
    "describe_fault",
    "expected_bytes",
    "expected_seconds",
    "find_region_files",
    "find_studies",
    "free_bytes",
    "inspect_inputs",
    "kept_regions",
    "key_of",
    "label_of",
    "load_secret",
    "nearest",
    "no_progress",
    "peek_secret",
    "preview_stacks",
    "read_echo_times",
    "read_site_curve",
    "resolve_settings",
    "run_study",
    "software_versions",
    "told_duration",
    "told_size",
]
