"""What ``--help`` says: examples first, then what the command does and its options."""

PROGRAM = "From multi-echo gradient-echo MRI to a liver iron concentration that may be trusted."

PROGRAM_EXAMPLES = """\
liverfe inspect SCAN
    Is this scan usable? Headers only, writes nothing.
liverfe run SCAN --regions liver.nii.gz --out results
    The main job: LIC, maps and a PDF for the radiologist.
liverfe batch STUDIES --out results --dry-run
    What a batch would do with every study in a folder.
liverfe phantom make demo-thalassaemia-1p5t --out demo
    A synthetic study with known truth, to try it all on."""

EXAMPLES_HEADING = "Examples"

INSPECT = """\
Tell from headers alone whether a scan can be measured. Shows each stack of echoes, which images
are missing, what was left out and why, which calibration curve would apply, and the range of R2*
and LIC that can be reported at SNR 20, 50 and 100. Writes nothing. The verdict is the last line:
usable, repeat or refused."""

INSPECT_SHORT = "Is this scan usable? Headers only."

INSPECT_EXAMPLES = """\
liverfe inspect SCAN
    A folder of DICOM files, a BIDS folder, or NIfTI files.
liverfe inspect echoes.nii.gz --echo-times-ms 0.9,1.8,2.7,3.6 --field-t 1.5
    A 4-D NIfTI file without a sidecar.
liverfe inspect SCAN --json
    The same as one JSON document."""

RUN = """\
Measure one study: noise, R2*, maps, regions, LIC and a PDF. Regions that lie inside INPUT or in
OUT/regions/STUDY KEY/ are used where --regions is left out. With no region at all there are maps,
and a report that says why no LIC is stated. The input is never changed; the LIC is the last
line."""

RUN_SHORT = "Measure one study: LIC, maps and a PDF."

RUN_EXAMPLES = """\
liverfe run SCAN --regions liver.nii.gz --out results
    One study, a label image drawn on it.
liverfe run SCAN --stack 2 --out results
    Of several usable stacks, the second; liverfe inspect lists them.
liverfe run SCAN --curve hernando2023_1p5 --method site.toml --out results
    A curve by key, and the choices of a locked method file.
liverfe run a.nii.gz b.nii.gz --regions roi.json --out results --json
    One file an echo, with sidecars; result.json on standard output."""

BATCH = """\
Measure every study under ROOT. One bad study never stops the rest: OUT/summary.csv has a row for
each usable stack and each refused study. Running the same command again goes on where it stopped,
and skips what is done. Exit status 4 says that some studies were refused or failed."""

BATCH_SHORT = "Measure every study in a folder."

BATCH_EXAMPLES = """\
liverfe batch STUDIES --out results --dry-run
    What would be done: series, echoes, field, curve, regions, time and disk. Writes nothing.
liverfe batch STUDIES --out results --workers 4
    Do it, with four worker processes.
liverfe batch STUDIES --out results
    Again: goes on where it stopped."""

CURVES = """\
List the calibration curves and band sets that ship, with citation, field strength, studied range
and how well each is known, and a site's own curve files."""

CURVES_SHORT = "List calibration curves and band sets."

CURVES_EXAMPLES = """\
liverfe curves
    Everything that ships.
liverfe curves --curve-file ours.toml
    A site's own curve beside them, checked.
liverfe curves --json
    The same as one JSON document."""

VERIFY = """\
Hash every file of a result folder again and compare with its manifest. DIR is the folder of one
study or a folder of such folders. Exit status 3 on any difference."""

VERIFY_SHORT = "Hash results again and compare."

VERIFY_EXAMPLES = """\
liverfe verify results/0123456789abcdef
    One result.
liverfe verify results
    Every result of a batch."""

PHANTOM = "Synthetic studies with known truth."

PHANTOM_EXAMPLES = """\
liverfe phantom list
    Which recipes ship.
liverfe phantom make demo-thalassaemia-1p5t --out demo
    Make one of them."""

PHANTOM_MAKE = """\
Make a synthetic study from a recipe: images, truth and a label image of its regions. The same
recipe and seed give the same files, byte for byte."""

PHANTOM_MAKE_EXAMPLES = """\
liverfe phantom make demo-thalassaemia-1p5t --out demo
    DICOM, all echoes in one series.
liverfe phantom make demo-thalassaemia-1p5t --out demo --format nifti
    NIfTI.
liverfe phantom make mine.toml --out demo --seed 7
    A recipe of your own, with other noise."""

PHANTOM_LIST = "List the recipes that ship."

PHANTOM_LIST_EXAMPLES = """\
liverfe phantom list
    Name and purpose of each.
liverfe phantom list --json
    The same as one JSON document."""

INPUT = "DICOM, NIfTI or BIDS: folders or files."
ROOT = "The folder that holds the studies."
DIR = "A result folder, or a folder of result folders."
RECIPE = "Name of a recipe that ships, or a TOML file."

OPT_VERSION = "Print the version and leave."
OPT_JSON = "One JSON document on standard output, nothing else there."
OPT_REGIONS = (
    "Label image (NIfTI) or outline file (JSON) with the drawn regions. "
    "Left out: those found in INPUT or in OUT/regions/STUDY KEY/."
)
OPT_OUT = "Folder for results; made where it does not exist."
OPT_STACK = "Which of several usable stacks, as numbered by liverfe inspect."
OPT_CURVE = "Calibration curve by key. Left out: the default of the field strength."
OPT_BANDS = "Band set by key. Left out: pmc8528353."
OPT_METHOD = "TOML file of a locked method: every choice that can move a number."
OPT_IDENTITY = (
    "What the report may carry: full (as in the files) or key. File names, logs and CSV only ever "
    "carry keys. Left out: full."
)
OPT_ECHO_TIMES = "Echo times in ms, comma-separated, for files that state none: 1.1,2.0,2.9"
OPT_FIELD = "Field strength in T, for files that state none."
OPT_CURVE_FILE = "TOML file with a site's own curve; may be repeated. Name its key with --curve."
OPT_WORKERS = "Worker processes. Left out: one for each processor."
OPT_TIMEOUT = "Minutes that one study may take. Left out: 30."
OPT_DRY_RUN = "Show what would be done; write nothing."
OPT_FORMAT = "Files to write."
OPT_LAYOUT = "How the files are arranged; left out: all echoes in one series or file."
OPT_SEED = "Seed of the noise, in place of the recipe's own."
