"""From the checked keys of [head] to a person's own surfaces and a head's size, in SI units."""

from __future__ import annotations

from pathlib import Path

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.objects_head import HeadSizeBrief, SurfacesBrief
from layout.brief.schema_common import UNSET
from layout.brief.schema_own_head import UNITS, OwnHeadForm
from layout.units import MM

# Key of the file -> field of SurfacesBrief.
_NUMBERS = {"surface_vertices": "vertices", "cortex_sources": "cortex_sources"}
HEAD_FILES = (
    "scalp",
    "outer_skull",
    "inner_skull",
    "cortex",
    "cortex_left",
    "cortex_right",
    "cortex_mask",
    "cortex_mask_left",
    "cortex_mask_right",
    "landmarks",
    "mni152_file",
)


def own_surfaces(form: OwnHeadForm, folder: Path) -> SurfacesBrief:
    """The surfaces with absolute paths; a file's name is taken from the brief's folder."""
    files = {key: folder / getattr(form, key) for key in HEAD_FILES if getattr(form, key) is not UNSET}
    said: dict[str, object] = {key: files[key] for key in ("scalp", "outer_skull", "inner_skull") if key in files}
    for key, field in _NUMBERS.items():
        if getattr(form, key) is not UNSET:
            said[field] = getattr(form, key)
    if form.least_gap_mm is not UNSET:
        said["gap"] = float(f"{form.least_gap_mm * MM:.15g}")
    if form.units is not UNSET:
        said["unit"] = UNITS[form.units]
    if form.mni152_to_files is not UNSET or "mni152_file" in files:
        said["mni_to_files"] = files.get("mni152_file", form.mni152_to_files)
    masks = _by_side(files, "cortex_mask")
    return SurfacesBrief(
        cortex=_by_side(files, "cortex"), landmarks=files["landmarks"], cortex_masks=masks or None, **said
    )


def head_size_brief(form: OwnHeadForm) -> HeadSizeBrief | None:
    """The size the template is to have, None where the brief gives none."""
    if form.size is not UNSET:
        return HeadSizeBrief(*NAMED_SIZES[form.size], name=form.size)
    given = {
        field: float(f"{getattr(form, f'{field}_mm') * MM:.15g}")
        for field in ("length", "breadth", "circumference")
        if getattr(form, f"{field}_mm") is not UNSET
    }
    return HeadSizeBrief(**given) if given else None


def _by_side(files: dict[str, Path], key: str) -> dict[str, Path]:
    names = {"both": key, "left": f"{key}_left", "right": f"{key}_right"}
    return {side: files[name] for side, name in names.items() if name in files}
