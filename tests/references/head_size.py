"""Adult head sizes [mm], measured on the living.

READ (mean and standard deviation computed from the survey's public data): Gordon et al. 2014, anthropometric
survey, NATICK/TR-15/007; 4,082 men and 1,986 women, all soldiers.
"""

MEN = {
    "circumference": (574.37, 16.05),
    "length": (199.50, 7.02),
    "breadth": (154.33, 5.53),
    "tragion_to_top": (131.15, 6.16),
}
WOMEN = {
    "circumference": (561.12, 19.36),
    "length": (189.82, 7.45),
    "breadth": (147.77, 5.19),
    "tragion_to_top": (126.48, 6.55),
}

# JUDGEMENT: where an average adult head may lie, from the means above and other adult tables.
AVERAGE_HEAD = {"length": (185, 205), "breadth": (145, 165), "circumference": (545, 580)}

# READ (percentiles by linear interpolation of the same public data).
_PERCENTILES = ("1st", "5th", "50th", "95th", "99th")
SURVEY = {
    sex: {what: dict(zip(_PERCENTILES, row, strict=True)) for what, row in rows.items()}
    for sex, rows in {
        "male": {
            "circumference": (538, 548, 574, 601, 614),
            "length": (182, 188, 200, 211, 215),
            "breadth": (142, 146, 154, 163, 168),
        },
        "female": {
            "circumference": (521, 532, 560, 597, 611),
            "length": (172, 178, 190, 202, 208),
            "breadth": (136, 140, 147, 156, 160),
        },
    }.items()
}
NAMED = {f"{sex} {percentile} percentile": (sex, percentile) for sex in SURVEY for percentile in _PERCENTILES}
