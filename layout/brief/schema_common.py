"""What every table of the brief's schema shares: the base of the models, units, texts and refusals."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Annotated

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field
from pydantic_core import PydanticCustomError

UNSET = None  # TOML has no null, so None can only mean "left out of the file"


@dataclass(frozen=True)
class Into:
    """The dataclass field a key fills, and the SI size of the unit the key is written in."""

    field: str
    unit: float = 1.0


def broken_rule(rule: str, *key: str | int, value: object = None) -> PydanticCustomError:
    """A refusal in our own words: `rule` continues the key's name, `key` is relative to where it is raised.

    `value` replaces the value found in the file at that key, for rules about several keys.
    """
    return PydanticCustomError("rule", "{rule}", {"rule": rule, "key": key, "value": value})


def _tuple_from_list(value: object) -> object:
    return tuple(value) if isinstance(value, list) else value


def checked_text(longest: int) -> AfterValidator:
    """A validator for a printable text of 1 to `longest` characters."""

    def check(text: str) -> str:
        if not text.isprintable() or text != text.strip() or not 1 <= len(text) <= longest:
            raise broken_rule(f"must be a printable text of 1 to {longest} characters without spaces at its ends")
        return text

    return AfterValidator(check)


def _without_repeats(names: tuple[str, ...]) -> tuple[str, ...]:
    repeated = next((name for name in names if names.count(name) > 1), None)
    if repeated is not None:
        raise broken_rule("must not name the same thing twice", value=repeated)
    return names


def check_names_differ(entries: tuple, *key: str) -> None:
    """Raises the refusal of the first entry whose name an earlier one has; `key` is the list of tables."""
    seen = set()
    for i, entry in enumerate(entries):
        if entry.name in seen:
            raise broken_rule("must differ from the names before it", *key, i, "name")
        seen.add(entry.name)


def one_of_words(words: tuple[str, ...]) -> str:
    """The words in quotes, as a list in a sentence."""
    quoted = [f'"{word}"' for word in words]
    return " or ".join([", ".join(quoted[:-1]), quoted[-1]] if len(quoted) > 1 else quoted)


def is_number(value: object) -> bool:
    """Whether a value of the file is a finite number that a double can hold."""
    try:
        return isinstance(value, (int, float)) and not isinstance(value, bool) and math.isfinite(value)
    except OverflowError:
        return False


FromList = BeforeValidator(_tuple_from_list)
Name = Annotated[str, checked_text(60)]
Names = Annotated[tuple[Name, ...], FromList, AfterValidator(_without_repeats)]
Radius = Annotated[float, Field(ge=1, le=150)]


class Form(BaseModel):
    """What every table of the brief shares."""

    model_config = ConfigDict(strict=True, frozen=True, extra="forbid", allow_inf_nan=False)
