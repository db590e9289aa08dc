"""Published and derived values for the 10-20 family.

COUNTS: read in ACNS Guideline 2 (Acharya et al. 2016, J Clin Neurophysiol 33:308) and Oostenveld & Praamstra
2001, Clin Neurophysiol 112:713. The 10-5 count includes neither A1 nor A2.

SPHERE: derived: unit sphere, nasion-inion and LPA-RPA arcs of 180°, so 10 % = 18°; (polar angle from Cz,
azimuth from the front, left positive) in degrees. Rows between ring and midline by the plane through three
points.

OKAMOTO: cortical points under 10-20 positions, MNI mm; Okamoto et al. 2004, NeuroImage 21:99. From memory: a
band only.

NAMES_10_5: a handful of names of Oostenveld & Praamstra 2001, from memory.
"""

COUNTS = {"10-20": 21, "10-10": 74, "10-5": 345}

SPHERE = {
    "Nz": (90.0, 0.0),
    "Fpz": (72.0, 0.0),
    "Fz": (36.0, 0.0),
    "Cz": (0.0, None),
    "Pz": (36.0, 180.0),
    "Oz": (72.0, 180.0),
    "Iz": (90.0, 180.0),
    "C1": (18.0, 90.0),
    "C3": (36.0, 90.0),
    "C5": (54.0, 90.0),
    "T7": (72.0, 90.0),
    "T9": (90.0, 90.0),
    "Fp1": (72.0, 18.0),
    "AF7": (72.0, 36.0),
    "F7": (72.0, 54.0),
    "FT7": (72.0, 72.0),
    "TP7": (72.0, 108.0),
    "P7": (72.0, 126.0),
    "PO7": (72.0, 144.0),
    "O1": (72.0, 162.0),
    "F3": (47.7005, 38.3612),
    "AF3": (59.0588, 21.4006),
    "FC3": (39.2654, 61.2059),
    "P3": (47.7005, 180 - 38.3612),
    "PO3": (59.0588, 180 - 21.4006),
    "CP3": (39.2654, 180 - 61.2059),
}
SPHERE_XYZ = {
    "C3": (-0.587785, 0.0, 0.809017),
    "T7": (-0.951057, 0.0, 0.309017),
    "Fp1": (-0.293893, 0.904508, 0.309017),
    "F7": (-0.769421, 0.559017, 0.309017),
    "F3": (-0.459031, 0.579960, 0.673006),
}
FP1_FP2_DEGREES = 34.182
F3_GREAT_CIRCLE = (-0.433027, 0.645416, 0.629226)
F3_DIFFERENCE_DEGREES = 4.75

OKAMOTO_BAND_MM = 15.0
OKAMOTO = {
    "Fp1": (-22, 70, 0),
    "F3": (-36, 49, 32),
    "F7": (-55, 34, -4),
    "Fz": (1, 41, 54),
    "C3": (-52, -16, 58),
    "Cz": (1, -22, 77),
    "T7": (-70, -21, -11),
    "P3": (-40, -76, 47),
    "Pz": (1, -69, 57),
    "P7": (-62, -65, 1),
    "O1": (-27, -100, 13),
}

NAMES_10_5 = """
Nz N1 N2h NFpz NFp1h NFp2 Fp1h Fp2h Fpz AFp7 AFp9 AFp10h AFpz AFp5h AF1h AF9 AFF7h AFF5 AFF9h AFFz F9 F7h
F10h FFT7 FFT9 FFT7h FFT9h FFC5 FFC5h FFCz FT7 FT9 FT10h FC5 FC1h FTT7 FTT9h FCC5h FCCz T7 T9 T7h T9h C5
C1h TTP7 TTP7h TTP10h CCP5h CCPz TP7 TP9h CP5h TPP7h TPP9h CPP5h CPPz P9h P7h PPO9h PPO5h POO9h POO1 POOz
O1h O2h OI1 OI2h OIz I1 I1h I2 Iz
""".split()  # noqa: SIM905
ABSENT_10_5 = """
C7 FC7 CP9 FFC7h CCP7h FT5 T5 TP5h Fp3 O3 N3 A1 A2 T3 T4 T6
""".split()  # noqa: SIM905
