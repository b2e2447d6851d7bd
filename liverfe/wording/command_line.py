"""What the commands say on screen; help texts stand in `command_help`."""

STEPS = {
    "survey": "Reading headers",
    "load": "Loading images",
    "measure": "Measuring",
    "write": "Writing report and maps",
    "batch": "Measuring studies",
}
"""Steps of a run, as its progress names them."""

# ---------------------------------------------------------------------------- settings and keys

ORIGIN_FLAG = "option {option}"
ORIGIN_ENVIRONMENT = "environment {name}"
ORIGIN_PROJECT_FILE = "project file {path}"
ORIGIN_USER_FILE = "user file {path}"
ORIGIN_DEFAULT = "default"

DID_YOU_MEAN = " Did you mean {word!r}?"

SETTINGS_FILE_UNREADABLE = "settings file {path} cannot be read: {reason}"
SETTING_UNKNOWN = "settings file {path}: unknown setting {name!r}.{nearest} Settings are: {known}."
SETTING_NOT_POSSIBLE = "{where}: {value!r} is not possible; wanted: {wanted}."

METHOD_FILE_UNREADABLE = "method file {path} cannot be read: {reason}"
METHOD_IS_LOCKED = (
    "the method file fixes {name} = {locked!r}, while {origin} says {asked!r}. Leave one of them "
    "out: a locked method that a flag overrides would carry a name that is not its own."
)
CURVE_FILE_UNREADABLE = "curve file {path} cannot be read: {reason}"
CURVE_FILE_UNNAMED = (
    "a curve file was given and no curve was chosen. A site's own curve applies only by name: add "
    "--curve {key}."
)
CURVE_UNKNOWN = "unknown curve {key!r}.{nearest} liverfe curves lists them all."
BANDS_UNKNOWN = "unknown band set {key!r}.{nearest} liverfe curves lists them all."

SECRET_NOT_WRITABLE = (
    "the secret that study keys are made with cannot be read or written at {path}: {reason}. "
    "Set LIVERFE_CONFIG_DIR to a folder of your own that can be written."
)
SECRET_DAMAGED = (
    "the secret that study keys are made with is damaged: {path}. Put it back from a backup; "
    "without it every study would get a new key. To start anew, delete the file."
)

# ------------------------------------------------------------------------------------- the call

INPUT_MISSING = "input {name!r} does not exist; check the path."
REGIONS_MISSING = "region file {name!r} does not exist; check the path."
STACK_UNKNOWN = "there is no usable stack {number}; {count} found: see liverfe inspect."
ECHO_TIMES_UNREADABLE = (
    "--echo-times-ms {text!r}: wanted are numbers in ms, comma-separated, such as 1.1,2.0,2.9"
)
ECHO_TIMES_IMPOSSIBLE = (
    "--echo-times-ms {text!r}: {value:g} ms is no echo time; from 0.3 to 100 ms is possible. "
    "Are these seconds?"
)
ROOT_IS_NO_FOLDER = "{name!r} is no folder; a batch wants the folder that holds the studies."
RECIPE_UNKNOWN = (
    "unknown recipe {name!r}.{nearest} liverfe phantom list names those that ship; a file of your "
    "own ends in .toml."
)

USAGE_HINT = "See {command} --help."

FAULT = (
    "A fault of ours, incident {incident}: {kind} in {place}. Your input was not changed, and no "
    "result was written. Please report these two lines; they hold nothing of the patient."
)
FAULT_NEXT = "LIVERFE_TRACEBACK=1 shows where it happened; its output may hold patient data."
SYSTEM_FAULT = (
    "The system refused: {reason}. No half result was left; mend the cause and run the same "
    "command again."
)
INTERRUPTED = "Interrupted. No half result was left; run the same command again to go on."

# --------------------------------------------------------------------------------------- inspect

VERDICT = {
    "usable": "usable: this scan can be measured.",
    "repeat": "repeat: {reason}",
    "refused": "refused: {reason}",
}

STACK_TITLE = "Stack {number}: {layout}"
STACK_TITLE_REFUSED = "Not usable: {layout}"
STACK_ECHOES = "echo times (ms)"
STACK_SIZE = "size"
STACK_FIELD = "field"
STACK_COMPLETE = "completeness"
STACK_CURVE = "curve"
STACK_LEFT_OUT = "left out"
STACK_RANGE = "reportable at SNR {snr:g}"
STACK_STUDY = "study key"

FIELD_UNKNOWN = "not stated"
FIELD_T = "{field:.3g} T"
NO_CURVE = "none: R2* only, no LIC"
COMPLETE = "{n_echoes} echoes x {n_slices} slices, complete"
INCOMPLETE = "{n_images} of {n_images_expected} images; missing ones are dots, one row an echo:"
RANGE_R2STAR = "R2* {low:.0f} to {high:.0f} 1/s"
RANGE_NONE = "nothing within the stated precision"
RANGE_LIC = "LIC {low} to {high} mg/g"
N_FILES = "{what}: {n_files} files, {why}"
ONE_FILE = "{what}: 1 file, {why}"

# ------------------------------------------------------------------------------------------- run

TABLE_REGION = "region"
TABLE_ORGAN = "organ"
TABLE_VOXELS = "voxels used"
TABLE_R2STAR = "R2* (1/s)"
TABLE_LIC = "LIC (mg/g)"
TABLE_INTERVAL = "95 %"
TABLE_BAND = "band"
USED_OF = "{used} of {all}"

FINDING_LINE = "{level}: {text} {remedy}"
REPORT_AT = "Report: {path}"
LIC_LINE = "{region}: LIC {lic} mg Fe per g dry weight{interval}, {band}{curve}"
LIC_BAND = "band {name!r} of set {set}, "
LIC_CURVE = "curve {key} at {field:.3g} T"
LIC_NONE = "{region}: R2* {r2star} 1/s, no LIC: {reason}"
NO_REGION_LINE = "Maps only, no LIC: {reason}"
NO_LIC_REASON = "see the cautions above"
REFUSED_LINE = "Refused, no number is given: {reason}"
INTERVAL = " ({interval})"
INTERVAL_CELL = "{low} to {high}"

# ----------------------------------------------------------------------------------------- batch

BATCH_MORE = "... and {n} more in the summary."
BATCH_ROW = "{key}: {outcome}: {reason}"
BATCH_ROW_CLEAN = "{key}: {outcome}"
BATCH_SUMMARY_AT = "Summary: {path}"
BATCH_LAST = "{total} rows: {counts}{before}."
BATCH_DONE_BEFORE = "; {n} were done before"
BATCH_COUNT = "{n} {outcome}"
BATCH_NOTHING = "no study was found under ROOT; give the folder that holds the studies."
BATCH_WAITING = "not measured yet; run the same command again to go on"
BATCH_NO_ROOM = (
    "about {needed} will be needed in {path} and {free} are free. Make room, or choose another "
    "--out."
)

OUTCOME_REASON = {
    "timeout": "it took longer than {minutes:g} minutes and was stopped; see --timeout-min",
    "died": "its worker process was ended from outside twice, most likely for want of memory",
    "fault": "a fault of ours, incident {incident}: {kind} in {place}",
    "system": "the system refused: {reason}",
}

PLAN_TITLE = "What a batch would do"
PLAN_COLUMNS = (
    "study",
    "outcome",
    "echoes x slices",
    "echo times (ms)",
    "field",
    "curve",
    "regions",
)
PLAN_NEW_KEY = "(key on first run)"
PLAN_ECHOES = "{n_images} of {n_images_expected}"
PLAN_REJECTED = "  {name}: left out: {layout}: {reason}"
PLAN_REFUSED = "  {name}: {reason}"
PLAN_ESTIMATE = "Estimate: about {duration} with {workers} workers, {disk} on disk ({free} free)."
PLAN_LAST = (
    "{usable} of {total} can be measured; {n_regions} of them have regions. Nothing was written."
)
PLAN_IS_REFUSED = "refused"
PLAN_IS_USABLE = "measure"

MINUTES = "{minutes:.0f} min"
SECONDS = "{seconds:.0f} s"
HOURS = "{hours:.1f} h"
MEGABYTES = "{mb:.0f} MB"
GIGABYTES = "{gb:.1f} GB"

# ----------------------------------------------------------------- curves, verify, phantom

CURVES_TITLE = "Calibration curves"
CURVES_COLUMNS = ("key", "field", "equation", "R2* studied (1/s)", "evidence", "citation")
CURVE_DEFAULT_MARK = "{key} (default)"
CURVE_LOCAL_MARK = "{key} LOCAL"
CURVE_RANGE = "{low:g} to {high:g}"
CURVE_RANGE_UNKNOWN = "not established"
BANDS_TITLE = "Band sets (mg/g dry weight)"
BANDS_COLUMNS = ("key", "band", "from", "to", "source")
CURVES_LAST = "{n_curves} curves, {n_bands} band sets. LIC is dry weight."

VERIFY_LAST_OK = "Nothing differs; results verified: {n}."
VERIFY_LAST_DIFFERS = "Different from their manifests: {n_bad} of {n} results."

RECIPES_TITLE = "Recipes"
RECIPES_COLUMNS = ("name", "what it is")
PHANTOM_MADE = "{n} image files, regions and truth in {path}"
PHANTOM_NEXT = "Next: liverfe run {images} --regions {regions} --out results"
