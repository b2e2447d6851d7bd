"""Files -> echo stacks and regions. The only room that reads a study's files.

`find_stacks` surveys an input from headers alone; `load_stack` reads the pixels of one of its
plans; `find_regions` and `read_regions` find and read what a reader drew, `write_outlines` keeps
outlines in a file of our own.
"""

from liverfe.acquire.load import load_stack
from liverfe.acquire.outline_file import write_outlines
from liverfe.acquire.plan import (
    InputFile,
    LoadedStack,
    Progress,
    SourceImage,
    StackPlan,
    Survey,
    Verdict,
)
from liverfe.acquire.region_files import check_frame_of_reference, find_regions, read_regions
from liverfe.acquire.survey import find_stacks

__all__ = [
    "InputFile",
    "LoadedStack",
    "Progress",
    "SourceImage",
    "StackPlan",
    "Survey",
    "Verdict",
    "check_frame_of_reference",
    "find_regions",
    "find_stacks",
    "load_stack",
    "read_regions",
    "write_outlines",
]
