"""A program in a terminal of the tests' own."""

import os
import re
import sys
from pathlib import Path

import pexpect

ROOT = Path(__file__).parent.parent.parent
COLOUR = re.compile(r"\x1b\[[0-9;]*(?:3[0-7]|9[0-7]|38;[0-9;]*)m")
CONTROL = re.compile(r"\x1b\[[0-9;?]*[a-zA-Z]")


def spawned(*words, folder=ROOT, columns=80, **env):
    """Python with these words in a pseudo-terminal; env: more of the environment, None for what must not be there."""
    plain = {key: value for key, value in os.environ.items() if key not in ("NO_COLOR", "FORCE_COLOR", "COLUMNS")}
    given = {**plain, "TERM": "xterm-256color", "PYTHONPATH": str(ROOT), **env}
    given = {key: value for key, value in given.items() if value is not None}
    return pexpect.spawn(
        sys.executable, list(map(str, words)), cwd=str(folder), env=given, dimensions=(40, columns), encoding="utf-8"
    )


def whole_output(child, timeout=60):
    """Everything it writes until it ends."""
    child.expect(pexpect.EOF, timeout=timeout)
    child.close()
    return child.before
