"""The methods paragraphs of a finished design, ready to paste, with the sources that it really used."""

from __future__ import annotations

from layout.anatomy.head import Region
from layout.brief.default_heads import DEFAULT_CONDUCTIVITIES
from layout.outputs.methods.goal import goal_paragraph, search_paragraph, value_paragraph
from layout.outputs.methods.sources import cite, numbered
from layout.outputs.methods.stock import noise_paragraph, sensors_paragraph
from layout.outputs.plain import fixed, one_line
from layout.outputs.result import DesignResult
from layout.units import CM2, MM, NAM

OTHER_HEADS = {"sphere": "a layered sphere", "surfaces": "built from a participant's own surfaces"}


def methods_text(result: DesignResult) -> str:
    """Methods paragraphs, one line each with a blank line between, and the numbered references they cite.

    Every number is the result's own; the text claims no more than a plan under a stated model.
    """
    paragraphs = [
        _head_paragraph(result),
        sensors_paragraph(result),
        noise_paragraph(result),
        goal_paragraph(result),
        search_paragraph(result),
        value_paragraph(result),
    ]
    text, references = numbered("\n\n".join(paragraphs))
    return "\n\n".join([text, "References", "\n".join(references)]) + "\n"


def _head_paragraph(result: DesignResult) -> str:
    head = result.brief.head
    sentences = [
        f"Sensor positions were planned by model before any measurement, with scalpsite {result.version} "
        f"(brief SHA-256 {result.brief.sha256[:12]}, random seed {result.brief.search.seed}).",
        _head_sentence(result),
        _model_sentence(result),
        _region_sentence(result),
    ]
    if head.kind == "template":
        sentences.append(
            "The average head has no ears and a plausible, not a measured, skull and skin; distances on a person "
            "differ."
        )
    return " ".join(sentences)


def _head_sentence(result: DesignResult) -> str:
    head, cortex = result.brief.head, result.head.cortex
    if head.kind == "template":
        what = (
            f"The head was an average adult's, no participant's own: an open average cortex {cite('average cortex')} "
            "inside skull and scalp surfaces built around it"
        )
    else:
        what = f"The head was {OTHER_HEADS[head.kind]}"
    if head.size is not None:
        what += ", scaled to " + (
            f"the size of the {one_line(head.size.name)} of a published survey {cite('head sizes')}"
            if head.size.name is not None
            else " and ".join(
                f"a {name} of {value / MM:g} mm"
                for name, value in (
                    ("length", head.size.length),
                    ("breadth", head.size.breadth),
                    ("circumference", head.size.circumference),
                )
                if value is not None
            )
        )
    normals = "with dipoles normal to it" if result.head.normal_orientation else "with dipoles in all directions"
    return f"{what}; {len(cortex)} current dipoles sampled the cortex, {normals} unless stated otherwise."


def _model_sentence(result: DesignResult) -> str:
    head = result.brief.head
    values = ", ".join(f"{value:g}" for value in head.conductivities)
    conductivities = f"conductivities of {values} S/m from the brain outwards"
    if head.conductivities == DEFAULT_CONDUCTIVITIES.get(len(head.conductivities)):
        sources = ("conductivity", "skull", "fluid") if len(head.conductivities) == 4 else ("conductivity", "skull")
        conductivities += f" (conventional values; brain-to-skull ratio near that measured in vivo {cite(*sources)})"
    magnetic = any(entry.kind != "electrode" for entry in result.brief.stock)
    if head.lead_field_file is not None:
        return (
            "The sensors' lead field was taken from a file and not computed here; strengths of the background and of "
            f"the eyes were set by a quick model of concentric spheres with {conductivities} {_spheres(result)}."
        )
    if head.kind != "sphere" and head.model == "boundary_elements":
        field = f", and fields by the integral of Geselowitz {cite('boundary field')}" if magnetic else ""
        return (
            f"Potentials were computed by Galerkin boundary elements of about {head.nodes} nodes a surface (inner "
            f"skull, outer skull, scalp) {cite('boundary potential', 'galerkin')} with the isolated-problem approach "
            f"{cite('isolated')}{field}, with {conductivities}."
        )
    field = f"; fields by the closed form for spherical conductors {cite('sphere field')}" if magnetic else ""
    quick = "" if head.kind == "sphere" else ", fitted to the head: a quick model, which moves sources and sensors"
    return f"Potentials were computed in concentric spheres {_spheres(result)} with {conductivities}{field}{quick}."


def _spheres(result: DesignResult) -> str:
    return cite("one sphere") if len(result.brief.head.conductivities) == 1 else cite("layered sphere")


def _region_sentence(result: DesignResult) -> str:
    said = {region.name: region for region in result.brief.regions}
    parts = [_region(region, said.get(region.name)) for region in result.regions]
    return f"Regions of interest, with the net moment (rms) assumed of each: {'; '.join(parts)}."


def _region(region: Region, said) -> str:
    parts = [f"{len(region.members)} dipoles on {fixed(float(region.areas.sum()) / CM2, 1)} cm²"]
    if said is not None and said.centre is not None:
        frame = {"mni152": "MNI152", "head": "the head frame", "files": "the files' frame"}[said.frame]
        centre = ", ".join(f"{value / MM:g}" for value in said.centre)
        parts.append(f"within {said.radius / MM:g} mm of ({centre}) mm in {frame}")
    elif said is not None and said.parcel is not None:
        parts.append(f"parcel {one_line(said.parcel)}")
    parts.append(f"{region.moment / NAM:g} nAm")
    if region.coherent:
        parts.append("acting as one coherent source")
    elif region.free_orientation:
        parts.append("independent dipoles in all directions")
    else:
        parts.append("independent dipoles")
    return f"{one_line(region.name)} ({', '.join(parts)})"
