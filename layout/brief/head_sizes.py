"""Head sizes of the published survey, by the words a brief uses.

Gordon et al. 2014, anthropometric survey, NATICK/TR-15/007 (4,082 men and 1,986 women, soldiers): percentiles by linear
interpolation of the public data, each measure by itself. Length and breadth only: women's circumference was taken over
hair (the ellipse of their length and breadth is 5 % short of it, of men's 3 %), so it would make heads too large.
"""

_PERCENTILES = ("1st", "5th", "50th", "95th", "99th")
# [m] length and breadth at these percentiles.
_SURVEY = {
    "male": ((0.182, 0.188, 0.200, 0.211, 0.215), (0.142, 0.146, 0.154, 0.163, 0.168)),
    "female": ((0.172, 0.178, 0.190, 0.202, 0.208), (0.136, 0.140, 0.147, 0.156, 0.160)),
}
# "female 5th percentile" -> length, breadth [m]
NAMED_SIZES: dict[str, tuple[float, float]] = {
    f"{sex} {percentile} percentile": (length, breadth)
    for sex, (lengths, breadths) in _SURVEY.items()
    for percentile, length, breadth in zip(_PERCENTILES, lengths, breadths, strict=True)
}
