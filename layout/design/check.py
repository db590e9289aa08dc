"""What a design of a brief would work on, without a search."""

from __future__ import annotations

from layout.brief.objects import Brief
from layout.design.problem import calibrated, patches
from layout.design.study import Progress, lay_out_study, silent
from layout.outputs.check import Check
from layout.physics.channels import candidate_channels
from layout.sensing.kept import named_reference


def examine(brief: Brief, progress: Progress = silent) -> Check:
    """Head, regions, sites, rules, model and noise figures of a brief, as `layout check` shows them."""
    study = lay_out_study(brief, progress)
    progress("background activity")
    calibration = calibrated(study, patches(study))
    return Check(
        brief=brief,
        head=study.head,
        standard=study.standard,
        regions=study.regions,
        candidates=study.candidates,
        conflicts=study.feasible.conflicts,
        kept=study.feasible.keep,
        reference=named_reference(brief, study.candidates),
        model=study.cortex,
        displacements=candidate_channels(study.candidates).displacements(study.cortex),
        figures_of_noise=calibration.figures(brief.noise.bandwidth, study.has_magnetometers),
    )
