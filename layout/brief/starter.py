"""Commented starter briefs: each is valid as it stands and explains every key it uses."""

from __future__ import annotations

import json
from dataclasses import dataclass
from string import Template

from layout.brief import starter_texts as texts
from layout.brief.starter_places import NAMED, WHERE, WHOLE, Place
from layout.errors import BriefError

STARTER_KINDS = ("cap", "helmet", "budget")
LARGEST_CAP = 40  # electrodes for which the 10-10 positions do on any head; more take the 10-5 positions
MOMENT = {"cap": 10, "helmet": 10, "budget": 15}  # nA m of each region


@dataclass(frozen=True)
class Answers:
    """What a starter brief is about.

    head: the line of [head] that says its size, "" for the average head. count: sensors. where: one of WHERE. budget:
    what the layout may cost and price: of one sensor, both or neither.
    """

    kind: str
    title: str
    regions: tuple[Place, ...]
    count: int
    head: str = ""
    where: str = WHOLE
    budget: float | None = None
    price: float | None = None


_USUAL = {
    "cap": Answers(
        "cap",
        "Speech study: which 24 holes of the cap",
        (NAMED["left inferior frontal"], NAMED["left superior temporal"]),
        24,
    ),
    "helmet": Answers(
        "helmet",
        "Both hands: twenty magnetometers on the scalp",
        (NAMED["left hand area"], NAMED["right hand area"]),
        20,
    ),
    "budget": Answers(
        "budget",
        "Prefrontal rhythms with an eight-contact headband",
        (NAMED["left prefrontal"], NAMED["right prefrontal"]),
        8,
        where="forehead and ears",
    ),
}


def usual_answers(kind: str) -> Answers:
    """What the starter of a kind holds where its user says nothing else; BriefError for a kind that is none."""
    if kind not in STARTER_KINDS:
        known = '", "'.join(STARTER_KINDS)
        raise BriefError(f'The kind of starter brief must be one of "{known}", but "{kind}" was given.')
    return _USUAL[kind]


def starter_brief(kind: str) -> str:
    """The text of a starter brief for "cap", "helmet" or "budget"; BriefError for any other kind.

    A key that is commented out shows its default: taking the # away changes nothing.
    """
    return brief_text(usual_answers(kind))


def brief_text(answers: Answers) -> str:
    """The text of a commented brief about what was answered."""
    housed = answers.kind == "helmet"
    zones = "".join(_zone(part.name, part.around, part.radius) for part in WHERE[answers.where])
    noise = texts.NOISE + (texts.SHIELDED_ROOM if housed else texts.QUIET)
    parts = (
        texts.OPENING + f"title = {_quoted(answers.title)}\n",
        texts.HEAD + (f"{answers.head}\n" if answers.head else "") + texts.HEAD_KEYS,
        texts.REGION_KEYS + "\n".join(_region(place, MOMENT[answers.kind]) for place in answers.regions),
        (texts.MAGNETOMETER_KEYS if housed else texts.ELECTRODE_KEYS) + _stock(answers),
        texts.PLACES + zones,
        noise,
        texts.GOAL + texts.BUDGET_KEYS + _budget(answers) + texts.EXISTING_KEYS + texts.SEARCH,
    )
    return "\n".join(parts)


def _region(place: Place, moment: float) -> str:
    centre = ", ".join(f"{value:g}" for value in place.centre)
    return Template(texts.REGION).substitute(
        name=_quoted(place.name), centre=f"[{centre}]", radius=f"{place.radius:g}", side=place.side, moment=moment
    )


def _stock(answers: Answers) -> str:
    text = {"cap": texts.CAP_STOCK, "helmet": texts.HELMET_STOCK, "budget": texts.BUDGET_STOCK}[answers.kind]
    zones = ", ".join(_quoted(part.name) for part in WHERE[answers.where])
    return Template(text).substitute(
        count=answers.count,
        family="10-10" if answers.count <= LARGEST_CAP and answers.where == WHOLE else "10-5",
        price="# price = 1.0" if answers.price is None else f"price = {answers.price:.12g}",
        only_in=f"only_in = [{zones}]   # left out: the whole scalp" if zones else "# only_in = []",
    )


def _zone(name: str, around: tuple[str, ...], radius: float) -> str:
    listed = ", ".join(_quoted(position) for position in around)
    return Template(texts.ZONE).substitute(name=name, around=listed, radius=f"{radius:g}")


def _budget(answers: Answers) -> str:
    return "" if answers.budget is None else f"[budget]\ntotal = {answers.budget:.12g}\n\n"


def _quoted(text: str) -> str:
    """A TOML basic string: JSON's escapes are among TOML's."""
    return json.dumps(text, ensure_ascii=False)
