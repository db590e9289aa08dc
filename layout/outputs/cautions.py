"""What the tool itself must say beside every plan."""

CAUTIONS = (
    "For planning research only: this is not a medical device, and no clinical decision may rest on it.",
    "Electrodes and sensors on people follow the maker's instructions, local codes and licensed practice.",
    "Worn heated sensors: check the skin-contact temperature limits yourself (41 °C, and the time-dependent "
    "limits of IEC 60601-1).",
    "The values hold for these candidates under this model of head and noise; compare layouts by ratios, "
    "since bits depend on the assumed strengths.",
)
