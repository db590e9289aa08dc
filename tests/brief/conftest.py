"""Lets the tests of the brief share one way to load a text."""

import pytest

from layout.brief.parse import load_brief


@pytest.fixture
def load_text(tmp_path):
    """A function from the text (or bytes) of a brief to the Brief."""

    def load(text):
        path = tmp_path / "study.toml"
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return load_brief(path)

    return load
