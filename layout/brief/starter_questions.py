"""The questions that make a starter brief one's own; each reads an answer or says in one sentence what it must be."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import dataclass, replace

from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.schema_common import one_of_words
from layout.brief.starter import STARTER_KINDS, Answers, usual_answers
from layout.brief.starter_places import MIDLINE, NAMED, PAIRED, RADIUS, UNDER_POSITION, WHERE, Place, place_at
from layout.errors import BriefError

CIRCUMFERENCES = (440, 680)  # mm, as head.circumference_mm may be
FARTHEST = 200  # mm, as a coordinate of regions.centre_mm may be
MOST_REGIONS = 12
LONGEST_TITLE = 100
LARGEST_SUM = 1e9
# Sensors that fit on the template at every head size allowed, by kind and place, with some room to choose.
MOST_SENSORS = {
    "cap": {"whole scalp": 200, "forehead and ears": 20, "top": 24, "back": 36},
    "helmet": {"whole scalp": 48, "forehead and ears": 4, "top": 12, "back": 12},
    "budget": {"whole scalp": 64, "forehead and ears": 12, "top": 16, "back": 16},
}
AVERAGE = "average"
NO_BUDGET = "none"


@dataclass(frozen=True)
class Question:
    """words: what is asked; hint: what may be answered; usual: the answer that Enter gives; read: takes an answer into
    the answers before it, or raises BriefError; asked: whether it is asked at all. All but read depend on the answers
    before it.
    """

    words: Callable[[Answers], str]
    hint: Callable[[Answers], str]
    usual: Callable[[Answers], str]
    read: Callable[[str, Answers], Answers]
    asked: Callable[[Answers], bool] = lambda before: True


KIND_WORDS = "What kind of study is it"
KIND_HINT = (
    "cap: electrodes at named positions of a cap; helmet: magnetometers on the scalp; budget: few electrodes, dry or "
    "in a wearable"
)


def read_kind(text: str) -> Answers:
    """The usual answers of a kind; BriefError for another word."""
    kind = text.strip().lower()
    if kind not in STARTER_KINDS:
        raise _refused("The kind of study", one_of_words(STARTER_KINDS), text)
    return usual_answers(kind)


def _refused(what: str, rule: str, given: str) -> BriefError:
    shown = "".join(c if c.isprintable() else " " for c in given)
    shown = shown if len(shown) <= 60 else shown[:59] + "…"
    return BriefError(f'{what} must be {rule}, but "{shown}" was given.')


def _sensors(answers: Answers) -> str:
    return "magnetometers" if answers.kind == "helmet" else "electrodes"


def _read_head(text: str, before: Answers) -> Answers:
    said = text.strip().lower()
    if said == AVERAGE:
        return replace(before, head="")
    if said in NAMED_SIZES:
        return replace(before, head=f'size = "{said}"')
    least, most = CIRCUMFERENCES
    per_unit = 10 if said.endswith("cm") else 1
    size = _number(said.removesuffix("mm").removesuffix("cm").strip())
    size = None if size is None else per_unit * size
    if size is None or not least <= size <= most:
        rule = f'"{AVERAGE}", a circumference from {least} to {most} mm, or a size such as "female 5th percentile"'
        raise _refused("The head", rule, text)
    return replace(before, head=f"circumference_mm = {size:.12g}")


def _head_said(before: Answers) -> str:
    return AVERAGE


def _read_regions(text: str, before: Answers) -> Answers:
    parts = [part.strip() for part in text.split(";") if part.strip()]
    if not 1 <= len(parts) <= MOST_REGIONS:
        raise _refused("The regions", f"1 to {MOST_REGIONS}, separated by semicolons", text)
    places = tuple(_place(part) for part in parts)
    names = [place.name for place in places]
    for name in names:
        if names.count(name) > 1:
            raise _refused("The regions", "named once each", name)
    return replace(before, regions=places)


def _place(text: str) -> Place:
    """A named place, the cortex under a standard position, or a ball round coordinates."""
    named = NAMED.get(" ".join(text.lower().split()))
    if named is not None:
        return named
    position = next((name for name in UNDER_POSITION if name.lower() == text.lower()), None)
    if position is not None:
        return place_at(f"under {position}", UNDER_POSITION[position], RADIUS)
    numbers = [_number(part) for part in re.split(r"[,\s]+", text.strip("()[] "))]
    if len(numbers) != 3 or any(one is None or abs(one) > FARTHEST for one in numbers):
        raise _refused(
            "A region",
            "a place of the list, a position such as C3, or x y z in mm of MNI152, each from -200 to 200",
            text,
        )
    said = " ".join(f"{one:g}" for one in numbers)
    return place_at(f"at {said}", tuple(numbers), RADIUS)


def by_coordinates(answers: Answers) -> tuple[Place, ...]:
    """The regions that were given by coordinates, of which nobody has seen yet whether they hold cortex."""
    return tuple(place for place in answers.regions if place.name.startswith("at "))


def _read_where(text: str, before: Answers) -> Answers:
    said = " ".join(text.lower().split())
    if said not in WHERE:
        raise _refused("Where sensors may sit", one_of_words(tuple(WHERE)), text)
    return replace(before, where=said)


def counts_allowed(answers: Answers) -> tuple[int, int]:
    """The fewest and most sensors that may be asked for."""
    return 1 if answers.kind == "helmet" else 2, MOST_SENSORS[answers.kind][answers.where]


def _count_said(before: Answers) -> str:
    usual = usual_answers(before.kind).count
    return str(min(usual, counts_allowed(before)[1]))


def _read_count(text: str, before: Answers) -> Answers:
    least, most = counts_allowed(before)
    said = text.strip()
    if not re.fullmatch(r"\d{1,4}", said, re.ASCII) or not least <= int(said) <= most:
        rule = f"a whole number from {least} to {most} ({before.where})"
        raise _refused(f"The number of {_sensors(before)}", rule, text)
    return replace(before, count=int(said))


def _read_budget(text: str, before: Answers) -> Answers:
    said = text.strip().lower()
    if said == NO_BUDGET:
        return replace(before, budget=None, price=None)
    total = _number(said)
    if total is None or not 0 < total <= LARGEST_SUM:
        raise _refused("The budget", f'"{NO_BUDGET}" or a sum over 0 and up to {LARGEST_SUM:.0f} (no currency)', text)
    return replace(before, budget=total)


def _dearest(before: Answers) -> float:
    """The price at which the budget buys the fewest sensors that may be asked for."""
    return before.budget / counts_allowed(before)[0]


def _price_said(before: Answers) -> str:
    return f"{before.budget / before.count:.3g}"


def _read_price(text: str, before: Answers) -> Answers:
    price = _number(text.strip())
    least, most = counts_allowed(before)[0], _dearest(before)
    if price is None or not 0 <= price <= most:
        rule = f"a sum from 0 to {most:.12g}, so that the budget buys {least}"
        raise _refused("The price of one sensor", rule, text)
    return replace(before, price=price)


def _title_said(before: Answers) -> str:
    usual = usual_answers(before.kind)
    if replace(before, title=usual.title) == usual:
        return usual.title
    regions = ", ".join(place.name for place in before.regions)
    title = f"{before.count} {_sensors(before)}: {regions}"
    return title if len(title) <= LONGEST_TITLE else title[: LONGEST_TITLE - 3].rstrip(" ,") + "..."


def _read_title(text: str, before: Answers) -> Answers:
    said = text.strip()
    if not said.isprintable() or not 1 <= len(said) <= LONGEST_TITLE:
        raise _refused("The title", f"a printable text of 1 to {LONGEST_TITLE} characters", text)
    return replace(before, title=said)


def _number(text: str) -> float | None:
    if not re.fullmatch(r"[+-]?(\d{1,12}(\.\d{0,9})?|\.\d{1,9})", text, re.ASCII):
        return None
    value = float(text)
    return value if math.isfinite(value) else None


QUESTIONS = (
    Question(
        words=lambda before: "Which head",
        hint=lambda before: (
            f'{AVERAGE}; a circumference, such as 560 mm or 56 cm; or a size such as "female 5th percentile" or '
            '"male 95th percentile"'
        ),
        usual=_head_said,
        read=_read_head,
    ),
    Question(
        words=lambda before: "Which regions of the cortex, separated by semicolons",
        hint=lambda before: (
            f"places: left or right, followed by {', '.join(PAIRED)}; or {', '.join(MIDLINE)}; positions, such as C3: "
            "the cortex under it; coordinates x y z in mm of MNI152, such as -38 -24 56. Places are rough: your own "
            "coordinates are better"
        ),
        usual=lambda before: "; ".join(place.name for place in before.regions),
        read=_read_regions,
    ),
    Question(
        words=lambda before: "Where may sensors sit",
        hint=lambda before: (
            f"{', '.join(WHERE)}; zones such as the forehead can be kept free in the brief, with keep_out"
        ),
        usual=lambda before: before.where,
        read=_read_where,
    ),
    Question(
        words=lambda before: (
            f"How many {_sensors(before)}" + ("" if before.kind == "helmet" else ", the reference counted")
        ),
        hint=lambda before: "{} to {}".format(*counts_allowed(before)),
        usual=_count_said,
        read=_read_count,
    ),
    Question(
        words=lambda before: "What may the sensors cost together",
        hint=lambda before: f"{NO_BUDGET}, or a sum in any currency: as many are bought as it pays for",
        usual=lambda before: NO_BUDGET,
        read=_read_budget,
    ),
    Question(
        words=lambda before: "What does one sensor cost",
        hint=lambda before: f"0 to {_dearest(before):.12g}",
        usual=_price_said,
        read=_read_price,
        asked=lambda before: before.budget is not None,
    ),
    Question(
        words=lambda before: "A title for the study",
        hint=lambda before: f"up to {LONGEST_TITLE} characters",
        usual=_title_said,
        read=_read_title,
    ),
)
