"""Reading a plan of many cells; every way it can go wrong is one sentence."""

from __future__ import annotations

import hashlib
from dataclasses import replace
from pathlib import Path

from pydantic import ValidationError

from layout.brief.build import head_brief
from layout.brief.build_own_head import HEAD_FILES
from layout.brief.head_sizes import NAMED_SIZES
from layout.brief.messages import first_refusal, shown, where
from layout.brief.objects import Brief
from layout.brief.objects_head import HeadSizeBrief
from layout.brief.objects_plan import AS_STATED, Plan, PlanHead, PlanLayout
from layout.brief.parse import is_file, load_brief, parsed_toml, read_bytes, refusal
from layout.brief.schema_common import UNSET, one_of_words
from layout.brief.schema_plan import PLAN_SCHEMA_VERSION, CrossForm, PlanForm

WHAT = "the plan"
BOTH = (PlanLayout("designed for the cell", "cell"), PlanLayout("designed for the brief", "brief"))
FROM_PLAN = "must be a file that exists (seen from the plan)"


def load_plan(path: Path | str) -> Plan:
    """The plan in the TOML file at `path` with its brief, checked as far as can be without building a head.

    Raises BriefError with one sentence naming the key (or the file), the rule and the value.
    """
    path = Path(path)
    content = read_bytes(path, WHAT)
    raw = parsed_toml(content, path, WHAT)
    form = _checked(raw, path)
    folder = path.parent.resolve()
    _check_files(form, raw, path, folder)
    brief = load_brief(folder / form.brief)
    try:
        return _plan(form, brief, folder, hashlib.sha256(content).hexdigest())
    except _RefusalError as problem:
        given = shown(problem.value)
        raise refusal(path, f"{where(problem.key, raw)} {problem.rule}, but {given} was given") from None


class _RefusalError(Exception):
    """A rule that joins plan and brief."""

    def __init__(self, rule: str, *key: str | int, value: object) -> None:
        super().__init__(rule)
        self.rule, self.key, self.value = rule, key, value


def _checked(raw: dict, path: Path) -> PlanForm:
    version = raw.get("schema")
    if type(version) is not int or version != PLAN_SCHEMA_VERSION:
        given = "it is missing" if version is None else f"{shown(version)} was given"
        raise refusal(path, f"schema must be {PLAN_SCHEMA_VERSION}, the version of plan read here, but {given}")
    try:
        return PlanForm.model_validate(raw)
    except ValidationError as error:
        raise refusal(path, first_refusal(error, raw, PlanForm)) from None


def _check_files(form: PlanForm, raw: dict, path: Path, folder: Path) -> None:
    named = [(("brief",), form.brief)]
    named += [(("layouts", i, "table"), one.table) for i, one in enumerate(form.layouts or ())]
    for i, one in enumerate(form.heads or ()):
        named += [(("heads", i, key), getattr(one, key)) for key in HEAD_FILES]
    for place, value in named:
        if value is not UNSET and not is_file(folder / value):
            raise refusal(path, f"{where(place, raw)} {FROM_PLAN}, but {shown(value)} was given")


def _plan(form: PlanForm, brief: Brief, folder: Path, sha256: str) -> Plan:
    cross = form.cross
    _check_brief(form, brief)
    heads = _heads(form, brief, folder)
    _check_layers(cross, heads)
    by = "count" if cross.counts is not UNSET else "budget" if cross.budgets is not UNSET else None
    layouts = tuple(
        PlanLayout(
            one.name,
            one.designed_for,
            None if one.table is UNSET else folder / one.table,
            one.sites,
        )
        for one in form.layouts or ()
    )
    return Plan(
        title=form.title,
        brief=brief,
        brief_name=form.brief,
        heads=heads,
        skull_factors=cross.skull_conductivity_factors or (1.0,),
        conductivities=cross.conductivities_s_per_m or (),
        by=by,
        amounts=tuple(float(one) for one in cross.counts or cross.budgets or ()),
        noise_factors=cross.noise_factors or (1.0,),
        sensor_factors=cross.sensor_noise_factors or (1.0,),
        background_factors=cross.background_factors or (1.0,),
        layouts=layouts or BOTH,
        starts=form.search.starts,
        proof_parts=form.search.proof_parts,
        sha256=sha256,
    )


def _check_brief(form: PlanForm, brief: Brief) -> None:
    cross = form.cross
    if any(entry.free_axes for entry in brief.stock if entry.kind == "magnetometer"):
        rule = 'must be a brief whose stock.axes are not "free" or "free_two" (a list of axes goes with many cells)'
        raise _RefusalError(rule, "brief", value=form.brief)
    if cross.budgets is not UNSET and brief.budget is None:
        raise _RefusalError("must be left out where the brief has no [budget]", "cross", "budgets", value=cross.budgets)
    if brief.goal.has_target and cross.counts is UNSET:
        rule = "must have counts where the brief seeks the smallest count for a target (it is then left aside)"
        raise _RefusalError(rule, "cross", value=[key for key in CrossForm.model_fields if getattr(cross, key)])
    if brief.head.lead_field_file is not None:
        for key in ("heads", "skull_conductivity_factors", "conductivities_s_per_m"):
            if (value := getattr(cross, key)) is not UNSET:
                rule = "must be left out where the brief's head.lead_field_file gives the lead field"
                raise _RefusalError(rule, "cross", key, value=value)
    for i, one in enumerate(form.layouts or ()):
        if one.designed_for is UNSET and brief.places.left_right_pairs:
            rule = "must not be given as a table or sites where the brief's places.left_right_pairs is true"
            raise _RefusalError(rule, "layouts", i, value=one.name)


def _heads(form: PlanForm, brief: Brief, folder: Path) -> tuple[PlanHead, ...]:
    own = {one.name: (i, one) for i, one in enumerate(form.heads or ())}
    for name, (i, one) in own.items():
        if name == AS_STATED or name in NAMED_SIZES:
            rule = f'must not be "{AS_STATED}" or a size of the survey, which have their meaning'
            raise _RefusalError(rule, "heads", i, "name", value=name)
        if one.lead_field_file is not UNSET:
            rule = "must be left out of a plan's heads"
            raise _RefusalError(rule, "heads", i, "lead_field_file", value=one.lead_field_file)
    asked = form.cross.heads or (AS_STATED,)
    heads = []
    for place, name in enumerate(asked):
        if name == AS_STATED:
            heads.append(PlanHead(name, brief.head))
        elif name in own:
            heads.append(PlanHead(name, head_brief(own[name][1], folder)))
        elif name in NAMED_SIZES:
            if brief.head.kind != "template":
                rule = 'must be a head of [[heads]] where the brief\'s head.kind is not "template"'
                raise _RefusalError(rule, "cross", "heads", place, value=name)
            length, breadth = NAMED_SIZES[name]
            size = HeadSizeBrief(length=length, breadth=breadth, name=name)
            heads.append(PlanHead(name, replace(brief.head, size=size)))
        else:
            known = one_of_words((AS_STATED, *own))
            rule = f"must be {known} or a size of the survey ({', '.join(NAMED_SIZES)})"
            raise _RefusalError(rule, "cross", "heads", place, value=name)
    unused = next((name for name in own if name not in asked), None)
    if unused is not None:
        raise _RefusalError("must be one of cross.heads", "heads", own[unused][0], "name", value=unused)
    return tuple(heads)


def _check_layers(cross: CrossForm, heads: tuple[PlanHead, ...]) -> None:
    for place, values in enumerate(cross.conductivities_s_per_m or ()):
        for one in heads:
            layers = len(one.head.conductivities)
            if len(values) != layers:
                rule = f'must have one value for each of the {layers} layers of the head "{one.name}"'
                raise _RefusalError(rule, "cross", "conductivities_s_per_m", place, value=values)
