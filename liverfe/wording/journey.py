"""Sentences of the journey that are no findings of their own."""

STACK_IN_LIST = (
    "stack {number}: {n_echoes} echoes from {first:g} to {last:g} ms, {n_slices} slices, {layout}"
)
"""One stack among several, in the finding that lists them."""

LEFT_OUT_IN_LIST = "{what} ({n_files} {files}: {why})"
"""Files that belong to no stack, in the finding that says that there is none."""

FILE_WORD = {True: "file", False: "files"}

NOTHING_LEFT_OUT = "nothing, there was no file"
