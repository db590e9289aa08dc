"""The cortex and noise pictures of a design as files of its layouts' folders."""

from __future__ import annotations

from layout.outputs.pictures.cortex_figure import cortex_pictures
from layout.outputs.pictures.figure import Picture
from layout.outputs.pictures.noise_figure import noise_pictures
from layout.outputs.result import DesignResult

ENDINGS = ("png", "svg", "pdf")
PICTURE_FILES = tuple(f"{name}.{ending}" for name in ("cortex", "noise") for ending in ENDINGS)


def picture_files(result: DesignResult) -> list[tuple[int, dict[str, bytes]]]:
    """(rank, file name -> content) of every layout; without a noise picture where the noise was not examined."""
    cortex, noise = cortex_pictures(result), noise_pictures(result)
    files = []
    for place, layout in enumerate(result.layouts):
        contents = _contents("cortex", cortex[place])
        if noise:
            contents |= _contents("noise", noise[place])
        files.append((layout.rank, contents))
    return files


def _contents(name: str, picture: Picture) -> dict[str, bytes]:
    return {f"{name}.{ending}": getattr(picture, ending) for ending in ENDINGS}
