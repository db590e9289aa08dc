"""Plans of many cells: what is read, and one sentence for every mistake."""

import pytest
from many_plan import PLAN, plan_of, written

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.parse_plan import load_plan
from layout.errors import BriefError

SPHERE_HEAD = '[head]\nkind = "sphere"\nsource_mesh = "coarse"\n'
TEMPLATE = '[head]\nkind = "template"\n'


def test_what_a_plan_says(tmp_path):
    plan = plan_of(tmp_path)
    assert [one.name for one in plan.heads] == ["small", "as stated"]
    assert plan.heads[0].head.radii == (0.070, 0.075, 0.080)
    assert plan.heads[1].head == plan.brief.head
    assert (plan.by, plan.amounts) == ("count", (4.0, 6.0))
    assert (plan.noise_factors, plan.skull_factors, plan.conductivities) == ((1.0, 0.3), (1.0,), ())
    assert [one.designed_for for one in plan.layouts] == ["cell", "brief", None]
    assert plan.layouts[2].sites == ("Fz", "Cz", "Pz", "P3", "C3", "C4")


def test_what_is_left_out_is_as_the_brief_has_it(tmp_path):
    plan = plan_of(tmp_path, 'schema = 1\ntitle = "Bare"\nbrief = "study.toml"\n')
    assert [one.name for one in plan.heads] == ["as stated"]
    assert (plan.by, plan.amounts, plan.starts, plan.proof_parts) == (None, (), None, None)
    assert [one.designed_for for one in plan.layouts] == ["cell", "brief"]


def test_a_size_of_the_survey_is_a_head_of_the_template(tmp_path):
    text = 'schema = 1\ntitle = "Sizes"\nbrief = "study.toml"\n[cross]\nheads = ["male 95th percentile"]\n'
    path = written(tmp_path, text)
    brief = tmp_path / "study.toml"
    brief.write_text(brief.read_text().replace(SPHERE_HEAD, TEMPLATE))
    (one,) = load_plan(path).heads
    assert (one.head.size.length, one.head.size.breadth) == NAMED_SIZES["male 95th percentile"]


WRONG = {
    "schema = 1|schema = 2": "schema must be 1, the version of plan read here, but 2 was given",
    'brief = "study.toml"|brief = "other.toml"': "brief must be a file that exists",
    "[cross]|[cross]\nnoise_factor = [1]": "cross.noise_factor is not a known key (did you mean noise_factors)",
    "[cross]|[crossed]\n[cross]": "crossed is not a known key (did you mean cross)",
    "counts = [4, 6]|counts = [4, 4]": "cross.counts[1] must not hold the same value twice, but 4 was given",
    "counts = [4, 6]|counts = [4, 6.5]": "cross.counts[1] must be a whole number, but 6.5 was given",
    "counts = [4, 6]|counts = []": "cross.counts must have at least 1 entry, but [] was given",
    "counts = [4, 6]|budgets = [4]": "cross.budgets must be left out where the brief has no [budget], but [4.0] was",
    "counts = [4, 6]|counts = [4]\nbudgets = [4]": "cross.budgets must be left out where there are counts",
    "noise_factors = [1, 0.3]|noise_factors = [0]": "cross.noise_factors[0] must be at least 0.001, but 0 was given",
    "noise_factors = [1, 0.3]|noise_factors = [nan]": "cross.noise_factors[0] must be a finite number, but nan",
    "noise_factors = [1, 0.3]|conductivities_s_per_m = [[0.3, 1.8, 0.01, 0.3]]": (
        'cross.conductivities_s_per_m[0] must have one value for each of the 3 layers of the head "small"'
    ),
    'heads = ["small"|heads = ["big"': 'cross.heads[0] must be "as stated" or "small" or a size of the survey (male',
    'heads = ["small", "as stated"]|heads = ["as stated"]': "heads[0].name must be one of cross.heads",
    'heads = ["small"|heads = ["small", "male 1st percentile"': (
        'cross.heads[1] must be a head of [[heads]] where the brief\'s head.kind is not "template"'
    ),
    'name = "small"|name = "as stated"': 'heads[0].name must not be "as stated" or a size of the survey',
    'designed_for = "cell"|designed_for = "me"': 'must be "cell" or "brief", but "me" was given',
    'designed_for = "cell"|sites = ["Cz"]\ntable = "study.toml"': (
        'layouts[0] (entry 1 of [[layouts]]) must have one of designed_for, table and sites, but "table, sites"'
    ),
    'name = "for the brief"|name = "for the cell"': "layouts[1].name",
    'designed_for = "cell"|table = "none.tsv"': "layouts[0].table (entry 1 of [[layouts]]) must be a file that exists",
    "radii_mm = [70, 75, 80]|radii_mm = [70, 75]": "heads[0].radii_mm must have at least 3 entries",
}


@pytest.mark.parametrize("change", WRONG)
def test_mistakes_are_one_sentence(tmp_path, change):
    old, new = change.split("|")
    assert old in PLAN
    with pytest.raises(BriefError) as caught:
        plan_of(tmp_path, PLAN.replace(old, new))
    assert WRONG[change] in str(caught.value)
    assert str(caught.value).count("\n") == 0


def test_too_many_cells_are_told(tmp_path):
    factors = ", ".join(str(one) for one in range(1, 100))
    cross = f"[cross]\nsensor_noise_factors = [{factors}]\nbackground_factors = [{factors}]"
    with pytest.raises(BriefError, match=r"cross must make at most 5000 cells, but 78408 was given"):
        plan_of(tmp_path, PLAN.replace("[cross]", cross))


def test_free_axes_and_pairs_have_no_plan(tmp_path):
    path = written(tmp_path)
    brief = tmp_path / "study.toml"
    text = brief.read_text()
    coil = (
        '[[stock]]\nkind = "magnetometer"\nname = "coil"\ncount = 1\nsites = { family = "10-20" }\n'
        'noise_ft_per_rthz = 10\naxes = "free"\n'
    )
    brief.write_text(text.replace("[noise]", f"{coil}[noise]"))
    with pytest.raises(BriefError, match=r"brief must be a brief whose stock.axes are not"):
        load_plan(path)
    brief.write_text(text + "[places]\nleft_right_pairs = true\n")
    with pytest.raises(BriefError, match=r"layouts\[2\].* must not be given as a table or sites"):
        load_plan(path)
    brief.write_text(text + "[goal]\nreach_bits = 1\n")
    path.write_text(PLAN.replace("counts = [4, 6]\n", ""))
    with pytest.raises(BriefError, match=r"cross must have counts"):
        load_plan(path)
