"""The paragraphs of the methods about sensors, their candidate sites, and noise."""

from __future__ import annotations

import numpy as np

from layout.brief.objects import GradiometerBrief, MagnetometerBrief, StockBrief
from layout.outputs.methods.sources import cite
from layout.outputs.plain import fixed, one_line, significant
from layout.outputs.result import DesignResult
from layout.units import FT, FT_PER_CM, MM, PERCENT, UV

CM2_PER_M2 = 1e4
DENSITY = "background moment density, rms"  # labels of the figures that the paragraph quotes
FIELD = "background field 6.5 mm off the scalp, rms"
FITTED = (
    "contact noise, rms",
    "magnetometers' own noise",
    "eye dipole, rms of each component",
    "field from outside, rms of each component",
    "gradients from outside, rms of each",
)
AXES = {
    "normal": "axis normal to the scalp",
    "tangents": "axis along one of two tangents",
    "any_of_three": "axis along the normal or one of two tangents",
    "two_axis": "two axes (the normal and one of two tangents)",
    "three_axis": "three axes",
    "free": "axis in any direction",
    "free_two": "two axes at right angles in any directions",
}


def sensors_paragraph(result: DesignResult) -> str:
    """What was placed, where it could go, and by which rules."""
    brief, candidates = result.brief, result.candidates
    sentences = []
    for index, entry in enumerate(brief.stock):
        chosen = sum(row.kind_number == index for row in result.layouts[0].sensors)
        mine = candidates.kind == index
        choices = int(mine.sum())
        places = len(np.unique(candidates.site[mine]))
        name = "" if entry.name == entry.kind else f" of the kind {one_line(entry.name)}"
        more = f" ({choices} candidates, axes counted apart)" if choices != places else ""
        sentences.append(
            f"{chosen} {entry.kind}{'' if chosen == 1 else 's'}{name} had {_sensor(entry)}, and could sit at any of "
            f"{places} sites{_sites(entry)}{more}{_rules(entry)}."
        )
    if any(entry.kind == "electrode" for entry in brief.stock):
        sentences.append(
            "The reference is one of the electrodes counted; potentials are known up to an offset common to all of "
            "them, so that which one is called the reference does not matter."
        )
    sentences.append(f"Places are told by the nearest position of the 10-5 system {cite('10-5')}.")
    if brief.places.left_right_pairs:
        sentences.append("Sites were chosen in left-right pairs only.")
    if brief.budget is not None:
        sentences.append(f"The whole layout could cost at most {brief.budget.total:g} in the brief's own unit.")
    if brief.existing is not None:
        use = "kept and extended" if brief.existing.use == "extend" else "the only sensors to choose from"
        sentences.append(f"A layout that exists already was {use}.")
    return " ".join(sentences)


def _sensor(entry: StockBrief) -> str:
    if entry.kind == "electrode":
        noise = f"{entry.contact_noise / UV:g} µV rms contact noise"
        elsewhere = [f"{value / UV:g} µV in {one_line(zone)}" for zone, value in entry.contact_noise_in.items()]
        noise += f" ({', '.join(elsewhere)})" if elsewhere else ""
        disc = f", averaging over {entry.disc_diameter / MM:g} mm discs" if entry.disc_diameter else ""
        return noise + disc + _errors(entry)
    text = f"{entry.noise_density / FT:g} fT/√Hz of noise, {_axes(entry)}, the sensitive centre "
    text += f"{entry.standoff / MM:g} mm off the scalp"
    if entry.hair:
        text += f" and {entry.hair / MM:g} mm of hair"
    return text + _errors(entry)


def _errors(entry: StockBrief) -> str:
    text = f", gain errors of {entry.gain_error / PERCENT:g} % rms" if entry.gain_error else ""
    return text + (f", crosstalk of {entry.crosstalk / PERCENT:g} %" if entry.crosstalk else "")


def _axes(entry: MagnetometerBrief | GradiometerBrief) -> str:
    if isinstance(entry, GradiometerBrief):
        return f"{entry.shape} with a baseline of {entry.baseline / MM:g} mm"
    if not isinstance(entry.axes, str):
        return f"axis one of {len(entry.axes)} stated directions"
    if entry.free_axes and entry.tilt_limit is not None:
        return f"{AXES[entry.axes]} within {np.degrees(entry.tilt_limit):.0f} degrees of the normal"
    return AXES[entry.axes]


def _sites(entry: StockBrief) -> str:
    sites = entry.sites
    if sites.family is not None:
        return f", the allowed positions of the {sites.family} system {cite(sites.family)}"
    if sites.grid_pitch is not None:
        return f" on a grid of {sites.grid_pitch / MM:g} mm pitch over the scalp"
    if sites.electrodes_tsv is not None:
        return " of a given list of positions"
    return ", the slots of a given helmet"


def _rules(entry: StockBrief) -> str:
    rules = [f"at least {entry.spacing / MM:g} mm apart"] if entry.spacing else []
    rules += [f"not at {', '.join(one_line(zone) for zone in entry.keep_out)}"] if entry.keep_out else []
    rules += [f"only in {', '.join(one_line(zone) for zone in entry.only_in)}"] if entry.only_in else []
    return "; " + ", ".join(rules) if rules else ""


def noise_paragraph(result: DesignResult) -> str:
    """The noise model, and which of its strengths are assumed."""
    noise = result.brief.noise
    low, high = noise.band
    sentences = [
        f"Noise was modelled in one band of {low:g}-{high:g} Hz"
        + ("." if noise.averages == 1 else f"; averaging {noise.averages} epochs divided all its variances."),
        f"Background activity was one moment density over the cortex, coherent within patches of "
        f"{fixed(noise.patch_area * CM2_PER_M2, 1)} cm² and independent between them"
        f"{'' if noise.regions_in_background else ', the regions of interest left out'}; "
        f"its strength was {_strength(result)}.",
    ]
    if noise.eyes_rms:
        sentences.append(
            "The eyes were a nuisance dipole of free direction at each eyeball"
            + ("." if noise.recording else f", {noise.eyes_rms / UV:g} µV rms at Fp1 and Fp2.")
        )
    else:
        sentences.append("Eye activity was left out.")
    outside = []
    if noise.field_rms:
        outside.append(f"homogeneous fields of {noise.field_rms / FT:g} fT rms")
    if noise.gradient_rms:
        outside.append(f"constant gradients of {noise.gradient_rms / FT_PER_CM:g} fT/cm rms")
    if outside and any(entry.kind != "electrode" for entry in result.brief.stock):
        sentences.append(f"Surroundings added {' and '.join(outside)}.")
    sentences.append("Muscle activity was not modelled.")
    if noise.recording is None:
        sentences.append("All strengths are assumptions of the plan, not measurements.")
    elif fitted := [label for label in FITTED if label in result.figures_of_noise]:
        told = (f"{label} {_figure(result, label)}" for label in fitted)
        sentences.append(f"The recording's own figures took the place of stated ones: {'; '.join(told)}.")
    return " ".join(sentences)


def _figure(result: DesignResult, label: str) -> str:
    figure = result.figures_of_noise[label]
    return f"{significant(figure.value, 3)} {figure.unit}"


def _strength(result: DesignResult) -> str:
    noise, figures = result.brief.noise, result.figures_of_noise
    if noise.recording is not None:
        text = f"fitted to a recording by restricted maximum likelihood {cite('fit')}"
    else:
        text = f"set once to {noise.eeg_rms / UV:g} µV rms of EEG at the positions of the 10-20 system {cite('10-20')}"
    if DENSITY in figures:
        text += f", a density of {_figure(result, DENSITY)} rms (1-2 is the largest seen {cite('density')})"
    if FIELD in figures:
        text += f", which implies {_figure(result, FIELD)} rms 6.5 mm off the scalp"
    return text
