"""From pydantic's findings to one sentence that names the key as the file has it, the rule and the value."""

from __future__ import annotations

import datetime
import difflib
import json
import re
from typing import get_args

from pydantic import ValidationError

from layout.brief.schema import BriefForm, Form

_TYPES = {
    "float_type": "must be a number",
    "int_type": "must be a whole number",
    "bool_type": "must be true or false",
    "string_type": "must be a text in quotes",
    "tuple_type": "must be a list in square brackets",
    "dict_type": "must be a table",
    "model_type": "must be a table",
    "model_attributes_type": "must be a table",
    "finite_number": "must be a finite number",
}
_LIMITS = {
    "greater_than": ("must be greater than", "gt"),
    "greater_than_equal": ("must be at least", "ge"),
    "less_than": ("must be less than", "lt"),
    "less_than_equal": ("must be at most", "le"),
}
_LONGEST_VALUE = 80
_ABSENT = object()


def first_refusal(error: ValidationError, raw: dict, form: type[Form] = BriefForm) -> str:
    """The refusal that comes first in the file, without a full stop; `raw` is the parsed TOML of such a form."""
    findings = error.errors(include_url=False)
    placed = sorted(((_path(finding), finding) for finding in findings), key=lambda p: _order(p[0], raw))
    path, finding = placed[0]
    more = f" (and {len(placed) - 1} more)" if len(placed) > 1 else ""
    return f"{where(path, raw)} {_rule(path, finding, raw, form)}{more}"


def where(path: tuple[str | int, ...], raw: dict) -> str:
    """`stock[1].count`, and which entry that is where a list of tables has several."""
    text, inside = "", raw
    entry = ""
    for i, part in enumerate(path):
        if isinstance(part, int):
            text += f"[{part}]"
            if isinstance(inside, list) and len(inside) > 1 and isinstance(inside[0], dict):
                entry = f" (entry {part + 1} of [[{'.'.join(str(p) for p in path[:i])}]])"
        else:
            bare = part if re.fullmatch(r"[A-Za-z0-9_-]+", part) else shown(part)
            text += f".{bare}" if text else bare
        inside = _step(inside, part)
    return text + entry


def shown(value: object) -> str:
    """A value as the file would write it, on one line and not too long."""
    text = _written(value, depth=0)
    return text if len(text) <= _LONGEST_VALUE else text[: _LONGEST_VALUE - 1] + "…"


def _written(value: object, depth: int) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        quoted = json.dumps(value[: _LONGEST_VALUE + 1], ensure_ascii=False)
        return "".join(c if c.isprintable() else f"\\u{ord(c):04x}" for c in quoted)
    if isinstance(value, int):
        return str(value) if abs(value) < 10**_LONGEST_VALUE else "a number of more than 80 digits"
    if isinstance(value, (datetime.date, datetime.time)):
        return value.isoformat()
    if isinstance(value, (list, tuple, dict)) and depth > 3:
        return "…"
    if isinstance(value, (list, tuple)):
        return f"[{', '.join(_written(v, depth + 1) for v in value[:_LONGEST_VALUE])}]"
    if isinstance(value, dict):
        pairs = list(value.items())[:_LONGEST_VALUE]
        return f"{{{', '.join(f'{_written(k, 0)[1:-1]} = {_written(v, depth + 1)}' for k, v in pairs)}}}"
    return str(value)


def _path(finding: dict) -> tuple[str | int, ...]:
    loc = tuple(finding["loc"])
    if loc[:1] == ("stock",) and len(loc) > 2:
        loc = loc[:2] + loc[3:]  # pydantic puts the chosen kind of sensor between the entry and its key
    if finding["type"].startswith("union_tag"):
        loc = (*loc, "kind")
    return loc + tuple(finding.get("ctx", {}).get("key", ()))


def _step(inside: object, part: str | int) -> object:
    if isinstance(part, str):
        return inside.get(part, _ABSENT) if isinstance(inside, dict) else _ABSENT
    return inside[part] if isinstance(inside, list) and part < len(inside) else _ABSENT


def _value(path: tuple[str | int, ...], raw: dict) -> object:
    inside: object = raw
    for part in path:
        inside = _step(inside, part)
    return inside


def _order(path: tuple[str | int, ...], raw: dict) -> tuple[int, ...]:
    """Place in the file: tables keep the order of their keys; a missing key comes after those present."""
    order, inside = [], raw
    for part in path:
        if isinstance(part, int):
            order.append(part)
        elif isinstance(inside, dict):
            order.append(list(inside).index(part) if part in inside else len(inside))
        inside = _step(inside, part)
    return tuple(order)


def _rule(path: tuple[str | int, ...], finding: dict, raw: dict, form: type[Form]) -> str:
    kind, ctx = finding["type"], finding.get("ctx", {})
    value = _value(path, raw)
    if kind.startswith("union_tag"):
        rule = 'must be "electrode", "magnetometer" or "gradiometer"'
    elif kind == "extra_forbidden":
        rule = f"is not a known key ({_suggestion(path, raw, form)})"
    elif kind == "literal_error":
        rule = f"must be {ctx['expected']}".replace("'", '"')
    elif kind == "rule":
        rule = ctx["rule"]
        value = value if ctx["value"] is None else ctx["value"]
    elif kind == "float_type" and type(value) is int:
        rule = "must be a number that a double can hold"
    elif kind in _TYPES:
        rule = _TYPES[kind]
    elif kind in _LIMITS:
        words, limit = _LIMITS[kind]
        rule = f"{words} {ctx[limit]:.12g}"
    elif kind == "too_short":
        rule = f"must have at least {ctx['min_length']} {'entry' if ctx['min_length'] == 1 else 'entries'}"
    elif kind == "too_long":
        rule = f"must have at most {ctx['max_length']} entries"
    elif kind == "missing":
        rule = "must be given"
    else:
        rule = f"cannot be taken ({finding['msg']})"
    return f"{rule}, but it is missing" if value is _ABSENT else f"{rule}, but {shown(value)} was given"


def _suggestion(path: tuple[str | int, ...], raw: dict, form: type[Form]) -> str:
    known = _known_keys(path[:-1], raw, form)
    near = difflib.get_close_matches(str(path[-1]), known, n=1, cutoff=0.6)
    return f"did you mean {near[0]}" if near else f"known here: {', '.join(known)}"


def _known_keys(path: tuple[str | int, ...], raw: dict, form: type[Form]) -> list[str]:
    """The keys the table at `path` of such a form may have."""
    for depth, part in enumerate(path):
        if isinstance(part, str):
            form = _form_for(form.model_fields[part].annotation, _value(path[: depth + 2], raw))
    return [field.alias or key for key, field in form.model_fields.items()]


def _form_for(annotation: object, table: object) -> type[Form]:
    """The model inside a field's annotation; of several, the one whose kind the table names."""
    if _is_form(annotation):
        return annotation
    found = [_form_for(inner, table) for inner in get_args(annotation) if get_args(inner) or _is_form(inner)]
    if len(found) > 1 and isinstance(table, dict):
        return next(f for f in found if table.get("kind") in get_args(f.model_fields["kind"].annotation))
    return found[0]


def _is_form(annotation: object) -> bool:
    return isinstance(annotation, type) and issubclass(annotation, Form)
