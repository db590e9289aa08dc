"""Rules for *_electrodes.tsv and *_coordsystem.json (eeg). Brain Imaging Data Structure 1.11 (read)."""

FIRST_COLUMNS = ["name", "x", "y", "z"]  # required, in this order
RECOMMENDED_COLUMNS = {"type", "material", "impedance"}  # any other needs a JSON that defines it
MISSING = "n/a"
UNITS = {"m", "mm", "cm", "n/a"}
REQUIRED_KEYS = {"EEGCoordinateSystem", "EEGCoordinateUnits"}
# "<system key>": "<key required where the system is Other>"
DESCRIBED_IF_OTHER = {
    "EEGCoordinateSystem": "EEGCoordinateSystemDescription",
    "AnatomicalLandmarkCoordinateSystem": "AnatomicalLandmarkCoordinateSystemDescription",
}
ELECTRODES_NAME = r"sub-[A-Za-z0-9]+(_ses-[A-Za-z0-9]+)?(_space-[A-Za-z0-9]+)?_electrodes\.tsv"
COORDSYSTEM_NAME = r"sub-[A-Za-z0-9]+(_ses-[A-Za-z0-9]+)?(_space-[A-Za-z0-9]+)?_coordsystem\.json"
