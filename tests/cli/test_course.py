"""The time left and the bar under a clock of the test's own: never running back, never nonsense."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from layout.cli import stages
from layout.cli.course import Course, Meter, Stage, in_words

PLAN = (Stage("loading", 2.0), Stage(r"count \d+", 10.0), Stage("drawing", 3.0))


def followed(plan, timed, end, every=0.25):
    """(time, truth, left, share) at every tick of a run whose messages come at the given times."""
    meter, seen, ahead = Meter(plan, 0.0), [], list(timed)
    for tick in range(int(end / every)):
        now = tick * every
        while ahead and ahead[0][0] <= now:
            at, doing = ahead.pop(0)
            meter.say(doing, at)
        left, share = meter.left(now), meter.share(now)
        seen.append((now, end - now, left, share))
    return seen


def check_sane(seen):
    shares = [share for *_, share in seen]
    assert shares == sorted(shares)
    assert all(0 <= share < 1 for share in shares)
    assert all(left is None or (math.isfinite(left) and left >= 0) for _, _, left, _ in seen)


@pytest.mark.parametrize("step", [0.5, 3.0, 40.0])
@pytest.mark.parametrize("steps", [2, 5, 30])
@pytest.mark.parametrize("plan", [(), (Stage("part", 10.0),)], ids=["unforeseen", "foreseen"])
@pytest.mark.parametrize("first", [0, 1])
def test_even_steps_are_told_within_a_factor_of_two(plan, steps, step, first):
    timed = [(number * step, f"part {number + first} of {steps}") for number in range(steps)]
    seen = followed(plan, timed, steps * step, step / 10)
    check_sane(seen)
    timed_already = [row for row in seen if row[0] >= step and row[1] >= step / 2]
    assert timed_already
    for now, truth, left, share in timed_already:
        assert truth / 2 <= left <= 2 * truth
        assert share >= 0.5 * now / (now + truth)


def test_steps_within_steps_and_what_comes_after_them():
    inner = [f"proof: {number} of at most 1000 parts, gap 1.2 %" for number in range(0, 1000, 100)]
    timed = [
        (10.0 * outer + place, f"count {4 * outer}, {outer + 1} of 3: {words}")
        for outer in range(3)
        for place, words in enumerate(inner)
    ]
    plan = (Stage(r"count \d+, \d+ of", 1.0, (Stage("proof", 1.0),)), Stage("drawing", 0.5))
    seen = followed(plan, [*timed, (30.0, "drawing")], 32.0)
    check_sane(seen)
    for now, truth, left, _ in seen:
        if 1.5 <= now < 29:
            assert truth / 2 <= left <= 2 * truth


@pytest.mark.parametrize("slower", [0.2, 1.0, 6.0])
def test_foreseen_stages_are_scaled_to_the_machine(slower):
    """Within a factor of two; in the last eighth of the run within an eighth of the whole."""
    plan = tuple(Stage(name, seconds) for name, seconds in (("a", 2), ("b", 6), ("c", 4), ("d", 8)))
    timed = [(slower * at, name) for at, name in ((0, "a"), (2, "b"), (8, "c"), (12, "d"))]
    seen = followed(plan, timed, 20 * slower, slower / 4)
    check_sane(seen)
    for now, truth, left, _ in seen:
        if 8 * slower <= now:
            whole = 20 * slower
            assert truth / 2 <= left <= 2 * truth or (truth <= whole / 8 and abs(left - truth) <= whole / 8)


def test_a_stage_far_over_its_time_makes_the_rest_unknown_and_the_next_one_known_again():
    seen = followed(PLAN, [(0, "loading"), (60, "drawing")], 70.0)
    check_sane(seen)
    assert seen[0][2] is not None
    assert all(left is None for now, _, left, _ in seen if 10 < now < 60)
    assert all(left is not None for now, _, left, _ in seen if now >= 60)


def test_what_nobody_foresaw_is_unknown_unless_it_counts():
    course = Course(PLAN, 0.0)
    assert course.left(0.0) is None
    course.say("loading", 0.0)
    course.say("something else", 1.0)
    assert course.left(1.5) is None
    course.say("another thing, 1 of 4", 2.0)
    assert course.left(2.5) is None
    course.say("another thing, 2 of 4", 3.0)
    assert course.left(3.0) == pytest.approx(3.0 + course.pace * 13.0)


def test_a_message_of_an_earlier_stage_changes_nothing():
    plan = (Stage(r"rank \d+ of", 1.0), Stage("proof", 4.0), Stage("drawing", 2.0))
    course, other = Course(plan, 0.0), Course(plan, 0.0)
    for one in (course, other):
        one.say("rank 1 of 3", 0.0)
        one.say("proof: 1 of at most 10 parts", 1.0)
        one.say("proof: 3 of at most 10 parts", 2.0)
    other.say("rank 1 of 3", 2.2)
    assert course.left(2.5) == other.left(2.5)


def test_stages_that_some_briefs_leave_out_are_not_expected():
    with_more = (*PLAN, Stage("sliding", 100.0, certain=False))
    courses = Course(PLAN, 0.0), Course(with_more, 0.0)
    for one in courses:
        one.say("loading", 0.0)
    first, second = (one.left(1.0) for one in courses)
    assert first == pytest.approx(second)


WORDS = st.one_of(
    st.text(max_size=30),
    st.sampled_from(["loading", "drawing", "reading the brief", "part 3 of 0", "part 7 of 2", "a 1 of 2: b 2 of 3: c"]),
    st.builds(
        "{} {} of {}{}".format,
        st.sampled_from(["count 4,", "part", "rank", "layout", "scenario"]),
        st.integers(0, 10**12),
        st.integers(0, 10**12),
        st.sampled_from(["", ": rank 1 of 2", ": judging 5 of 6: x", ":", ": "]),
    ),
)


@settings(max_examples=150, deadline=None)
@given(st.sampled_from(["DESIGN", "CURVE", "ASSESS", "SIMULATE"]), st.lists(st.tuples(st.floats(0, 50), WORDS)))
def test_any_messages_at_any_times_give_sane_numbers(name, said):
    meter, now, before = Meter(getattr(stages, name), 0.0), 0.0, 0.0
    for pause, doing in said:
        now += pause
        meter.say(doing, now)
        for later in (now, now + 0.1, now + 3, now + 300):
            left, share = meter.left(later), meter.share(later)
            assert left is None or (math.isfinite(left) and left >= 0)
            assert before <= share < 1
            before = share
        now += 300


@pytest.mark.parametrize(
    ("left", "words"),
    [
        (None, ""),
        (0.0, "a few seconds left"),
        (9.9, "a few seconds left"),
        (14, "about 10 s left"),
        (99, "about 100 s left"),
        (100, "about 2 min left"),
        (3000, "about 50 min left"),
        (4 * 3600, "about 4 h left"),
    ],
)
def test_words_are_no_more_exact_than_the_estimate(left, words):
    assert in_words(left) == words
