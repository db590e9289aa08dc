"""The lead field of a brief's candidates to a file, for use elsewhere."""

from __future__ import annotations

from pathlib import Path

from layout.brief.objects import Brief
from layout.design.scenarios import own_scenario
from layout.design.study import Progress, lay_out_study, silent
from layout.physics.given_lead_field import lead_field_arrays
from layout.physics.lead_field_files import check_lead_field_file, write_lead_field


def export_lead_field(brief: Brief, path: Path, progress: Progress = silent) -> tuple[int, int]:
    """Write the gain of every candidate's channels to the whole cortex, free moments; (n_channels, n_sources).

    Raises FileError, before anything is computed, for an ending that names no kind of file or a place that is a folder.
    """
    check_lead_field_file(path)
    study = lay_out_study(brief, progress)
    progress("lead field of all candidates")
    arrays = lead_field_arrays(study.candidates, brief.stock, study.cortex, own_scenario(study).channels)
    progress("writing")
    path.parent.mkdir(parents=True, exist_ok=True)
    write_lead_field(path, arrays)
    return arrays.gain.shape[:2]
