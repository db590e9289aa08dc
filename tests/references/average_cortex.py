"""What others give for the average cortex that the template head carries."""

# MEMORY: vertices of a side (10,242) that belong to the cortex by the makers' own label, left and right.
# A band of 2 %, since the label itself is not among the files read here.
CORTEX_VERTICES = {-1: 9354, 1: 9361}
CORTEX_VERTICES_TOLERANCE = 0.02

# MEMORY: area of an adult's cortex, both sides, halfway through its thickness [cm²]: 1,500 to 2,000.
# An average of many cortices is smoother and smaller, so the lower end is loose.
CORTEX_AREA_CM2 = (1000, 2000)
