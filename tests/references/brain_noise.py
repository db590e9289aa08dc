"""Sizes of spontaneous brain activity at sensors.

Source: textbooks, and Knuutila & Hämäläinen 1988 for the magnetic noise (both from memory): alpha rhythm 20-100 µV
peak to peak on the scalp; magnetic brain noise 20-40 fT/sqrt(Hz) below about 20 Hz, measured about 20 mm off the
scalp (helmets: Zetter et al. 2018, Brain Topogr, at least 2 cm, read). Plausibility bands, not gates of precision.
"""

EEG_PEAK_TO_PEAK_UV = (20.0, 100.0)
MAGNETIC_FT_PER_RTHZ = (20.0, 40.0)
# Murakami & Okada 2015, NeuroImage 111:49 (from memory): cortex reaches 1-2 nAm/mm² at most.
LARGEST_DENSITY_NAM_PER_MM2 = 1.0
