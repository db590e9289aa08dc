"""Small briefs for tests of the noise, the yardsticks and the whole pipeline."""

import tempfile
from functools import cache
from pathlib import Path

from layout.brief.objects import Brief
from layout.brief.parse import load_brief
from layout.design import Problem, Study, build_problem, lay_out_study

SPHERE = '[head]\nkind = "sphere"\nsource_mesh = "coarse"\n'
TEMPLATE = '[head]\nkind = "template"\nmodel = "spheres"\n'  # boundary elements have tests of their own
BAND = "[noise]\nband_hz = [1, 40]\n"
CUPS = '[[stock]]\nkind = "electrode"\nname = "cup"\ncount = {count}\nsites = {{ {sites} }}\ncontact_noise_uv = 1\n'
COILS = (
    '[[stock]]\nkind = "magnetometer"\nname = "coil"\ncount = {count}\nsites = {{ {sites} }}\nnoise_ft_per_rthz = 10\n'
)


def region(name: str, centre: tuple, side: str, radius: float = 14, more: str = "") -> str:
    """A region in the head frame, of free orientation unless `more` says otherwise."""
    frame = more or 'frame = "head"\norientation = "free"\n'
    return (
        f'[[regions]]\nname = "{name}"\ncentre_mm = {list(centre)}\nradius_mm = {radius}\nside = "{side}"\n'
        f"moment_nam = 10\n{frame}"
    )


TWO_REGIONS = region("left", (-45, 5, 50), "left") + region("right", (40, -30, 45), "right")
HANDS = region("left hand", (-38, -24, 56), "left", 12, 'frame = "mni152"\n') + region(
    "right hand", (38, -24, 56), "right", 12, 'frame = "mni152"\n'
)
FRONTAL = region("left frontal", (-30, 58, 8), "left", 15, 'frame = "mni152"\n') + region(
    "right frontal", (30, 58, 8), "right", 15, 'frame = "mni152"\n'
)


def cups(count: int, sites: str = 'family = "10-10"', more: str = "") -> str:
    """Electrodes of 1 µV contact noise."""
    return CUPS.format(count=count, sites=sites) + more


def coils(count: int, sites: str = "grid_mm = 30", more: str = "") -> str:
    """Magnetometers of 10 fT/sqrt(Hz)."""
    return COILS.format(count=count, sites=sites) + more


def brief_of(*tables: str) -> Brief:
    """The brief of these tables of TOML."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "study.toml"
        path.write_text("\n".join(['schema = 1\ntitle = "A study"', *tables]))
        return load_brief(path)


@cache
def study_of(*tables: str) -> Study:
    """The study of these tables, laid out once for all tests that ask for it."""
    return lay_out_study(brief_of(*tables))


@cache
def problem_of(*tables: str) -> Problem:
    """The engine's model of these tables."""
    return build_problem(study_of(*tables))
