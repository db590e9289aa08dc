"""The files that lie beside the report, with what each is for."""

from __future__ import annotations

from collections.abc import Sequence

WORDS = {  # the bench's papers first; a file that is not named here comes last, by its name alone
    "placement-sheet-a4.pdf": "to place the sensors by, A4",
    "placement-sheet-letter.pdf": "the same on Letter",
    "cap-template-a4.pdf": "to cut and lay on the head, A4",
    "cap-template-letter.pdf": "the same on Letter",
    "cap-template.svg": "the same in one piece",
    "helmet-poses.csv": "poses of the sensors' housings",
    "helmet-poses.json": "the same for programs",
    "helmet-shell.stl": "a shell with holes, to print",
    "helmet.glb": "scalp and housings in three dimensions",
    "scalp-and-sensors.stl": "the same as one solid",
    "clashes.csv": "housings that share space",
    "sheet.csv": "the placement sheet's numbers",
    "sensors.csv": "places and axes of the sensors",
    "placement.csv": "how exactly each must sit",
    "substitutes.csv": "what can stand in for each",
    "expected_loss.csv": "what failures and misplacement cost",
    "scalp.png": "the flat picture, for screens",
    "scalp.svg": "the flat picture, for print",
    "scalp.pdf": "the flat picture, for papers",
    "cortex.png": "regions and sensitivity on the cortex, for screens",
    "cortex.svg": "the same, for print",
    "cortex.pdf": "the same, for papers",
    "noise.png": "what the noise is made of, for screens",
    "noise.svg": "the same, for print",
    "noise.pdf": "the same, for papers",
    "magnetometers.tsv": "places and axes of the magnetometers",
    "magnetometers.json": "what its columns mean",
    "methods.txt": "the methods text of this page",
    "ranking.csv": "the ranked layouts",
    "ranking.json": "everything, for programs",
    "curve.csv": "value and bound against what is spent",
    "curve.png": "the same as a picture, for screens",
    "curve.svg": "the same, for print",
    "curve.pdf": "the same, for papers",
    "curve-columns.json": "what the curve's columns mean",
    "columns.json": "what every column means",
}


def files_of(rank: int, beside: Sequence[str]) -> list[tuple[str, str]]:
    """(link, what it is for) of each of the files `beside` the page that lies in the layout's folder."""
    return _listed([name for name in beside if name.startswith(f"layout-{rank}/")])


def shared_files(beside: Sequence[str]) -> list[tuple[str, str]]:
    """(link, what it is for) of each of the files `beside` the page that belongs to no single layout."""
    return _listed([name for name in beside if not name.startswith("layout-")])


def _listed(names: list[str]) -> list[tuple[str, str]]:
    order = list(WORDS)

    def place(name: str) -> tuple[int, str]:
        last = name.rpartition("/")[2]
        return (order.index(last) if last in WORDS else len(order), name)

    return [(name, WORDS.get(name.rpartition("/")[2], "")) for name in sorted(names, key=place)]
