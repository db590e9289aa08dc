"""The methods paragraphs: the result's own numbers, and citations of what it used, all of them and no more."""

import dataclasses
import re
from pathlib import Path

import pytest

from layout.brief.objects import GradiometerBrief, HeadSizeBrief, RecordingBrief, ScenariosBrief, SitesBrief
from layout.outputs.methods.sources import SOURCES, cite, numbered
from layout.outputs.methods.text import methods_text
from layout.outputs.plain import bound_text, fixed, rounded_up


def cited(text):
    """Keys of the sources in the reference list."""
    references = text.split("References\n\n")[1]
    return {key for key, source in SOURCES.items() if source in references}


def body(text):
    return text.split("\n\nReferences\n")[0]


def with_brief(result, **changes):
    return dataclasses.replace(result, brief=dataclasses.replace(result.brief, **changes))


@pytest.fixture(scope="module")
def template(result):
    """A result of the average head with boundary elements."""
    head = dataclasses.replace(result.brief.head, kind="template", model="boundary_elements")
    return with_brief(result, head=head)


def test_numbers_are_the_results(result):
    text, best, brief = body(methods_text(result)), result.layouts[0], result.brief
    said = [
        f"scalpsite {result.version}",
        f"seed {brief.search.seed}",
        brief.sha256[:12],
        f"gives {fixed(best.value, 3)} bits",
        f"upper bound is {bound_text(best.bound, 'bits')} bits",
        f"a gap of {rounded_up(best.gap_percent, 2)} %",
        f"rank 1 (of {len(result.layouts)} ranked) has {len(best.sensors)} sensors",
        f"from {result.search_effort['starts']} starts",
        f"{result.search_effort['parts examined']} parts examined",
        "conductivities of 0.33, 0.0042, 0.33 S/m",
        f"{len(result.head.cortex)} current dipoles",
        "7.5 µV rms of EEG",
        "20 µV rms at Fp1 and Fp2",
        "band of 1-40 Hz",
        "1 µV rms contact noise",
        "10 fT/√Hz",
        "15 fT/√Hz",
        "grid of 15 mm",
        "6.5 mm off the scalp",
        f"up to {best.even_spread_limit} sensors do not",
        *(f"{base.name} {fixed(base.value, 3)}" for base in result.baselines),
        *(f"{region.name} ({len(region.members)} dipoles" for region in result.regions),
    ]
    assert [one for one in said if one not in text] == []
    changed = dataclasses.replace(result, layouts=(dataclasses.replace(best, value=7.7777), *result.layouts[1:]))
    assert "gives 7.778 bits" in methods_text(changed)


def test_every_number_of_the_text_is_accounted_for(template):
    """What is left when the numbers of the result are struck out is only what the sentences themselves carry."""
    text = re.sub(r"\[[\d, ]+\]", "", body(methods_text(template)))
    own = {"10", "20", "5", "1", "2", "6.5", "1000", "256"}  # 10-20, 10-5, rank 1, log2, Fp1, Fp2, nodes, SHA-256
    best = template.layouts[0]
    known = own | {"0.33", "0.0042", "7.5", "20", "40", "15", "8", "4", "0.1", "3"} | {"10.0", "20.0"}
    known |= {fixed(best.value, 3), bound_text(best.bound, "bits"), rounded_up(best.gap_percent, 2), "64", "120"}
    known |= {str(len(region.members)) for region in template.regions}
    known |= {fixed(float(region.areas.sum()) / 1e-4, 1) for region in template.regions}
    known |= {fixed(base.value, 3) for base in template.baselines} | {"200"}
    known |= {str(len(template.candidates.sites)), str(len(best.sensors)), str(len(template.head.cortex)), "7"}
    numbers = set(re.findall(r"(?<![\w.])\d+(?:\.\d+)?(?![\w.]*\d)", text.replace("0.1.0", "").replace("ab" * 6, "")))
    assert numbers - known == set()


def test_citations_are_numbered_as_they_come_and_all_are_used(template):
    text = methods_text(template)
    numbers = [int(one) for mark in re.findall(r"\[([\d, ]+)\]", body(text)) for one in mark.split(", ")]
    assert list(dict.fromkeys(numbers)) == list(range(1, len(cited(text)) + 1))
    assert text.count("\n[") == len(cited(text))
    assert "\x02" not in text
    assert "\x03" not in text
    assert numbered(f"a {cite('rank', 'design')} b {cite('design')}")[0] == "a [1, 2] b [2]"
    with pytest.raises(KeyError):
        cite("hearsay")


def test_models_cite_their_own_sources(result, template):
    spheres, elements = cited(methods_text(result)), cited(methods_text(template))
    assert {"layered sphere", "sphere field"} <= spheres
    assert not {"isolated", "galerkin", "boundary field", "average cortex"} & spheres
    assert {"isolated", "galerkin", "boundary potential", "boundary field", "average cortex"} <= elements
    assert not {"layered sphere", "sphere field", "one sphere"} & elements
    cups = with_brief(template, stock=template.brief.stock[:1])
    assert "boundary field" not in cited(methods_text(cups))
    one = with_brief(result, head=dataclasses.replace(result.brief.head, conductivities=(0.33,)))
    assert {"one sphere"} == cited(methods_text(one)) & {"one sphere", "layered sphere"}
    default = dataclasses.replace(template.brief.head, conductivities=(0.33, 0.0165, 0.33))
    assert {"conductivity", "skull"} <= cited(methods_text(with_brief(template, head=default)))
    assert not {"conductivity", "skull", "fluid"} & elements
    given = dataclasses.replace(template.brief.head, lead_field_file=Path("gain.npz"))
    text = methods_text(with_brief(template, head=given))
    assert "taken from a file and not computed" in text
    assert "isolated" not in cited(text)


def test_goals_cite_their_own_sources(result):
    information = methods_text(result)
    assert {"information", "design", "branch"} <= cited(information)
    assert not {"error bound", "rank", "fit", "head sizes"} & cited(information)
    goal = dataclasses.replace(result.brief.goal, kind="localisation", error_over="worst")
    text = methods_text(dataclasses.replace(with_brief(result, goal=goal), unit="mm", goal="localisation"))
    assert "error bound" in cited(text)
    assert "information" not in cited(text)
    assert "linearised" in text
    assert "30 mm per axis" in text
    assert "100 % on the moment, worst over the regions' sources" in text
    assert "lower bound is" in text
    assert "bits" not in body(text)


def test_search_noise_and_scenarios_as_they_were(result):
    relaxed = dataclasses.replace(result, bound_from="the rank-aware relaxation", stopped_by_clock=True)
    text = methods_text(relaxed)
    assert {"rank"} == cited(text) & {"rank", "branch"}
    assert "time allowance" in text
    noise = dataclasses.replace(result.brief.noise, recording=RecordingBrief(Path("rest.edf")), averages=50)
    text = methods_text(with_brief(result, noise=noise))
    assert "fit" in cited(text)
    assert "averaging 50 epochs" in text
    assert "assumptions of the plan, not measurements" not in text
    judged = ScenariosBrief(judge="worst", heads=("female 5th percentile",), noise_factors=(2.0,))
    text = methods_text(with_brief(result, scenarios=judged))
    assert "the worst of the stated case and 1 with other head sizes, 1 with other noise levels" in text
    assert "head sizes" in cited(text)


def test_sizes_gradiometers_and_sites(template):
    small = dataclasses.replace(template.brief.head, size=HeadSizeBrief(length=0.18, breadth=0.14))
    assert "scaled to a length of 180 mm and a breadth of 140 mm" in methods_text(with_brief(template, head=small))
    pair = GradiometerBrief("pair", 2, SitesBrief(family="10-10"), "axial", 0.05, 1e-14)
    text = methods_text(with_brief(template, stock=(*template.brief.stock[:2], pair)))
    assert "axial with a baseline of 50 mm" in text
    assert "10-10" in cited(text)
    assert "10-10" not in cited(methods_text(template))


def test_hostile_names_stay_on_their_line(result):
    regions = (dataclasses.replace(result.regions[0], name="left\x02rank\x03\n\nReferences"), *result.regions[1:])
    text = methods_text(dataclasses.replace(result, regions=regions))
    assert text.count("\n\nReferences\n\n") == 1
    assert "rank" not in cited(text)
