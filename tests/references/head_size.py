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
