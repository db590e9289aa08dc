"""The starter briefs load, explain every key, and show the true defaults."""

import dataclasses
import re

import pytest

from layout.brief import schema_common, schema_stock
from layout.brief.starter import STARTER_KINDS, starter_brief
from layout.errors import BriefError

COMMENTED_KEY = re.compile(r"^# (?=[a-z_0-9]+ = )", re.MULTILINE)


def test_starters_ask_for_what_their_users_have(load_text):
    sensors = {kind: [(s.kind, s.count) for s in load_text(starter_brief(kind)).stock] for kind in STARTER_KINDS}
    assert sensors == {
        "cap": [("electrode", 24)],
        "helmet": [("magnetometer", 20)],
        "budget": [("electrode", 8)],
    }


@pytest.mark.parametrize("kind", STARTER_KINDS)
def test_taking_the_comment_sign_away_changes_nothing(load_text, kind):
    """Every default a starter shows is the default that holds, to the last digit."""
    text = starter_brief(kind)
    as_given = load_text(text)
    full, n = COMMENTED_KEY.subn("", text)
    assert n > 20
    assert dataclasses.replace(load_text(full), sha256=as_given.sha256) == as_given


def below(form):
    return [one for sub in form.__subclasses__() for one in (sub, *below(sub))]


@pytest.mark.parametrize("kind", STARTER_KINDS)
def test_starter_explains_every_key_it_could_use(kind):
    text = starter_brief(kind)
    housed = {schema_stock.HousedForm, *below(schema_stock.HousedForm)}
    other = {schema_stock.ElectrodeForm} if kind == "helmet" else housed
    forms = [form for form in below(schema_common.Form) if form not in other]
    forms = [form for form in forms if form.__module__ != "layout.brief.schema_plan"]  # of `layout many`, no brief's
    keys = {field.alias or key for form in forms for key, field in form.model_fields.items()}
    if kind != "helmet":
        keys -= {"slots_csv"}
    missing = {key for key in keys if not re.search(rf"\b{key}\b", text)}
    assert not missing


@pytest.mark.parametrize("kind", STARTER_KINDS)
def test_starter_is_a_plain_text_that_prints_well(kind):
    text = starter_brief(kind)
    assert text.isascii()
    assert max(map(len, text.splitlines())) <= 110
    assert text.endswith("\n")
    assert not text.endswith("\n\n")
    assert "\n\n\n" not in text


def test_unknown_kind_of_starter():
    with pytest.raises(BriefError, match=r'"cap", "helmet", "budget", but "hat" was given\.$'):
        starter_brief("hat")
