"""Layers a head gets when the brief gives none, by their number."""

# Brain (and CSF) to scalp [S/m]. Brain and scalp: the conventional set (Geddes & Baker 1967, Med Biol Eng
# 5:271, from memory);
# skull 1/20 of the brain: Zhang, van Drongelen & He 2006, Appl Phys Lett 89:223903, found 18.7 +- 2.1;
# CSF: Baumann et al. 1997, IEEE Trans Biomed Eng 44:220.
DEFAULT_CONDUCTIVITIES = {3: (0.33, 0.0165, 0.33), 4: (0.33, 1.79, 0.0165, 0.33)}
# [m] Three layers: Rush & Driscoll 1968, Anesth Analg 47:717; four: Naess et al. 2017, Front Hum Neurosci
# 11:490 (both sets from memory).
DEFAULT_RADII = {3: (80e-3, 85e-3, 92e-3), 4: (79e-3, 80e-3, 85e-3, 90e-3)}
DEFAULT_CORTEX_DEPTH = 12e-3  # m
