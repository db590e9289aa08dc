"""Every way of answering the questions of a new brief: what is taken parses, what is refused is said in a sentence."""

import itertools
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.starter import STARTER_KINDS, brief_text, starter_brief, usual_answers
from layout.brief.starter_places import NAMED, UNDER_POSITION, WHERE
from layout.brief.starter_questions import QUESTIONS, by_coordinates, counts_allowed, read_kind
from layout.errors import BriefError


def answered(kind, texts):
    """The answers after all questions; texts: question by number -> what is said, Enter elsewhere."""
    answers = read_kind(kind)
    for number, question in enumerate(QUESTIONS):
        if question.asked(answers):
            answers = question.read(texts.get(number, question.usual(answers)), answers)
    return answers


@pytest.mark.parametrize("kind", STARTER_KINDS)
def test_enter_all_through_gives_the_starter_as_it_stands(kind):
    assert answered(kind, {}) == usual_answers(kind)
    assert brief_text(answered(kind, {})) == starter_brief(kind)


HEADS = ("average", "560", "440 mm", "female 5th percentile", "Male 99th percentile")
REGIONS = ("left hand area", "C3; oz", "-38 -24 56; 38,-24,56; foot area", "(0, -88, 4)")


@pytest.mark.parametrize("kind", STARTER_KINDS)
def test_every_combination_of_answers_parses(load_text, kind):
    """The product over all choices; counts are the fewest, the usual and the most in turn."""
    product = itertools.product(HEADS, REGIONS, WHERE, ("none", "400"), ("A study", 'Quotes " and \\ µ'))
    for turn, (head, regions, where, budget, title) in enumerate(product):
        answers = answered(kind, {0: head, 1: regions, 2: where})
        count = (*counts_allowed(answers), answers.count)[turn % 3]
        answers = answered(kind, {0: head, 1: regions, 2: where, 3: str(count), 4: budget, 6: title})
        if turn % 5 == 0:  # reading a brief takes some milliseconds; every value of every question comes by
            brief = load_text(brief_text(answers))
            (entry,) = brief.stock
            assert (brief.title, entry.count) == (title, count)
            assert [region.name for region in brief.regions] == [place.name for place in answers.regions]
            assert [[1e3 * one for one in region.centre] for region in brief.regions] == [
                pytest.approx(place.centre) for place in answers.regions
            ]
            assert list(entry.only_in) == [part.name for part in WHERE[where]]
            assert (brief.budget is None) == (budget == "none")
            assert brief.budget is None or brief.budget.total == 400


def test_sizes_of_the_head_arrive(load_text):
    assert load_text(brief_text(answered("cap", {0: "560.5"}))).head.size.circumference == pytest.approx(0.5605)
    assert load_text(brief_text(answered("cap", {0: "54.5 cm"}))).head.size.circumference == pytest.approx(0.545)
    for name in NAMED_SIZES:
        length, breadth = NAMED_SIZES[name]
        size = load_text(brief_text(answered("cap", {0: name.upper()}))).head.size
        assert (size.length, size.breadth) == pytest.approx((length, breadth))


@settings(max_examples=300, deadline=None)
@given(st.sampled_from(STARTER_KINDS), st.integers(0, len(QUESTIONS) - 1), st.text(max_size=40))
def test_any_text_is_taken_or_refused_in_one_sentence(kind, number, text):
    answers = replace(usual_answers(kind), budget=100.0, price=1.0)
    try:
        taken = QUESTIONS[number].read(text, answers)
    except BriefError as refusal:
        said = str(refusal)
        assert said.isprintable()
        assert said.endswith("was given.")
        assert " must be " in said
        assert len(said) < 300
    else:
        assert brief_text(taken)


@pytest.mark.parametrize(
    ("number", "text", "said"),
    [
        (0, "12", r'The head must be "average", a circumference from 440 to 680 mm.*"12" was given\.$'),
        (0, "43 cm", "a circumference from 440 to 680 mm"),
        (0, "nan", "The head must be"),
        (1, "nowhere", r'A region must be a place of the list.*"nowhere" was given\.$'),
        (1, "1 2", "A region must be"),
        (1, "0 0 300", "from -200 to 200"),
        (1, "C3; c3", r'named once each, but "under C3" was given'),
        (1, " ; ", "1 to 12, separated by semicolons"),
        (2, "nose", '"whole scalp", "forehead and ears", "top" or "back", but "nose"'),
        (3, "1", "The number of electrodes must be a whole number from 2 to"),
        (3, "1e3", "a whole number"),
        (3, "٣", "a whole number"),
        (4, "0", 'The budget must be "none" or a sum over 0'),
        (5, "51", r"a sum from 0 to 50, so that the budget buys 2, but \"51\" was given"),
        (6, "x" * 101, "1 to 100 characters"),
        (6, "a\x1b[31mb", "printable"),
    ],
)
def test_refusals_name_the_rule_and_the_value(number, text, said):
    with pytest.raises(BriefError, match=said):
        QUESTIONS[number].read(text, replace(usual_answers("cap"), budget=100.0))


def test_an_unknown_kind_is_refused():
    with pytest.raises(BriefError, match=r'The kind of study must be "cap", "helmet" or "budget", but "hat" was given'):
        read_kind("hat")


def test_only_coordinates_are_still_to_be_looked_at():
    answers = answered("cap", {1: "C3; left fusiform; 1 2 3"})
    assert [place.name for place in by_coordinates(answers)] == ["at 1 2 3"]


def test_sides_follow_from_the_centre():
    places = {**NAMED, **{name: answered("cap", {1: name}).regions[0] for name in UNDER_POSITION}}
    for name, place in places.items():
        x = place.centre[0]
        assert place.side == ("both" if x == 0 else "left" if x < 0 else "right"), name
        assert name.startswith(place.side) or place.side == "both" or name in UNDER_POSITION
