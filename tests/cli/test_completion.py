"""What a shell fills in, asked of bash itself."""

import os
import shutil
import subprocess
import sys

import pexpect
import pytest
from click.testing import CliRunner
from shown import ROOT

from layout.cli import cli

bash = pytest.mark.skipif(shutil.which("bash") is None, reason="needs bash")


@pytest.fixture
def here(tmp_path):
    """A folder with a `layout` command, briefs and other files, and the environment in which bash finds them."""
    (tmp_path / "bin").mkdir()
    command = tmp_path / "bin" / "layout"
    command.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m layout "$@"\n')
    command.chmod(0o755)
    for name in ("studies/readme.toml", "studies/reading.toml", "studies/readings.txt", "odd/a study.toml"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_text("")
    path = f"{tmp_path / 'bin'}:{os.environ['PATH']}"
    return tmp_path, {**os.environ, "PATH": path, "PYTHONPATH": str(ROOT), "TERM": "dumb"}


def completed(here, *words):
    """What bash offers for the last of the words, and what it is told to do itself."""
    folder, env = here
    script = """
eval "$(layout completion bash)"
COMP_WORDS=("$@")
COMP_CWORD=$(($# - 1))
compopt() { kinds="$1 $2"; }
_layout_completion layout
printf "%s\\n" "$kinds" "${COMPREPLY[@]}"
"""
    words = ["bash", "--norc", "-c", script, "bash", *words]
    said = subprocess.run(words, capture_output=True, text=True, env=env, cwd=folder, check=True)
    assert said.stderr == ""
    kinds, *offered = said.stdout.splitlines()
    return kinds, [word for word in offered if word]


@bash
def test_commands_options_kinds_and_briefs_are_completed(here):
    assert completed(here, "layout", "c") == ("", ["check", "completion", "curve"])
    assert completed(here, "layout", "design", "--qu")[1] == ["--quick", "--quiet"]
    assert completed(here, "layout", "new", "")[1] == ["cap", "helmet", "budget"]
    assert completed(here, "layout", "new", "h")[1] == ["helmet"]
    assert completed(here, "layout", "completion", "")[1] == ["bash", "zsh", "fish"]
    assert completed(here, "layout", "check", "studies/read")[1] == ["studies/reading.toml", "studies/readme.toml"]
    assert completed(here, "layout", "check", "stu") == ("-o default", [])  # a folder: bash goes on by itself
    assert completed(here, "layout", "check", "odd/") == ("-o default", [])  # bash knows how to quote


@bash
def test_the_tab_key_completes_in_bash(here):
    folder, env = here
    child = pexpect.spawn(
        "bash", ["--norc", "--noprofile", "-i"], cwd=str(folder), env=env, encoding="utf-8", timeout=20
    )
    child.sendline("PS1=; bind 'set enable-bracketed-paste off'")
    child.sendline('eval "$(layout completion bash)"; echo ready-$((40+2))')
    child.expect("ready-42")
    child.send("echo x layout\x01\x04\x04\x04\x04\x04\x04\x04\x05 che\tstudies/readm\t\x01echo got: \x05\n")
    child.expect("got: layout check studies/readme.toml")
    child.close()


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_every_shell_gets_a_script_of_its_own(shell):
    said = CliRunner().invoke(cli, ["completion", shell])
    assert said.exit_code == 0
    assert f"_LAYOUT_COMPLETE={shell}_complete" in said.output
    refused = CliRunner().invoke(cli, ["completion", "csh"])
    assert refused.exit_code == 2
    assert "csh" in refused.output
