"""Many cells on real processes: workers that die, a cluster that runs already, Ctrl-C in the midst."""

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import dask
import psutil
import pytest
from click.testing import CliRunner
from many_plan import deadly_work, plan_of, slow_work, written

from layout.cli import cli
from layout.design.many import on_dask as many_dask
from layout.design.many.run import ManyCells
from layout.outputs.many.folder import TABLES, ManyFolder

pytestmark = pytest.mark.slow
SAME = [name for name in TABLES if name != "times.csv"]
ROOT = Path(__file__).parents[1]


@pytest.fixture(scope="module")
def serial(tmp_path_factory):
    """The folder of a run in this process."""
    folder = tmp_path_factory.mktemp("serial")
    out = ManyFolder(folder / "out")
    out.finish(ManyCells(plan_of(folder)).run(out.known, out.keep, workers=0))
    return out.place


def same_tables(one, other):
    for name in SAME:
        assert (one / name).read_bytes() == (other / name).read_bytes(), name


def processes_below(pid):
    """Worker processes of dask under a process."""
    return [one for one in psutil.Process(pid).children(recursive=True) if "spawn_main" in " ".join(one.cmdline())]


def test_a_worker_of_three_is_killed_midway_and_nothing_is_lost(tmp_path, serial, monkeypatch):
    monkeypatch.setattr(many_dask, "work", slow_work)
    folder, killed, running = ManyFolder(tmp_path / "out"), [], []

    def keep(result, key, seconds):
        folder.keep(result, key, seconds)
        if not killed:
            running.extend(one.pid for one in processes_below(os.getpid()))
            killed.append(running[-1])
            os.kill(killed[0], signal.SIGKILL)

    found = ManyCells(plan_of(tmp_path)).run(folder.known, keep, workers=3)
    folder.finish(found)
    assert len(running) == 3
    assert not any(psutil.pid_exists(pid) for pid in running)
    assert not any(one.error for one in found.cells)
    same_tables(folder.place, serial)


def test_a_cell_that_ends_every_worker_is_told_and_the_rest_goes_on(tmp_path, serial, monkeypatch):
    monkeypatch.setattr(many_dask, "work", deadly_work)
    folder = ManyFolder(tmp_path / "out")
    with dask.config.set({"distributed.scheduler.allowed-failures": 0}):  # of 3: a death more or less shows nothing
        found = ManyCells(plan_of(tmp_path)).run(folder.known, folder.keep, workers=1)
    assert [place for place, one in enumerate(found.cells) if one.error] == [3]
    assert found.cells[3].error == "every worker that took this cell ended (1 of them, twice over)"
    folder.finish(found)
    assert len(list(folder.place.glob("cells/*.json"))) == 7  # a restart tries it again
    again = []
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(many_dask, "work", None)  # nothing is sent to workers
        folder.finish(ManyCells(plan_of(tmp_path)).run(folder.known, lambda *one: again.append(one), workers=0))
    assert len(again) == 1
    same_tables(folder.place, serial)


def test_ctrl_c_leaves_finished_cells_and_no_process_and_a_restart_goes_on(tmp_path, serial):
    plan, out = written(tmp_path), tmp_path / "out"
    command = [sys.executable, "-m", "layout", "many", str(plan), "--workers", "2", "--out", str(out)]
    run = subprocess.Popen(
        command,
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    while not list(out.glob("cells/*.json")) and run.poll() is None:
        time.sleep(0.02)
    below = processes_below(run.pid)
    os.killpg(run.pid, signal.SIGINT)  # as a terminal does: the workers get it too
    printed, said = run.communicate(timeout=60)
    assert (run.returncode, printed, said) == (130, "", "Stopped.\n")
    assert len(below) == 2
    assert not psutil.wait_procs(below, timeout=5)[1]
    kept = {path.name for path in out.glob("cells/*.json")}
    assert 1 <= len(kept) < 8
    assert not (out / "many.csv").exists()
    folder, new = ManyFolder(out), []

    def keep(result, key, seconds):
        folder.keep(result, key, seconds)
        new.append(f"cell-{key[:20]}.json")

    folder.finish(ManyCells(plan_of(tmp_path)).run(folder.known, keep, workers=0))
    assert len(new) == 8 - len(kept)
    assert not kept & set(new)
    same_tables(out, serial)


def test_a_running_scheduler_and_its_workers_are_used(tmp_path, serial):
    where = tmp_path / "scheduler.json"
    dask_command = [sys.executable, "-m", "dask"]
    options = ["--scheduler-file", str(where), "--no-dashboard"]
    env = {**os.environ, "PYTHONPATH": str(ROOT), "OMP_NUM_THREADS": "1"}
    commands = [[*dask_command, "scheduler", "--host", "127.0.0.1", "--port", "0", *options]]
    commands += [[*dask_command, "worker", *options, "--nthreads", threads, "--no-nanny"] for threads in "12"]
    started = [subprocess.Popen(one, cwd=tmp_path, env=env, stderr=subprocess.DEVNULL) for one in commands]
    try:
        while not where.exists() and started[0].poll() is None:
            time.sleep(0.05)
        address = json.loads(where.read_text())["address"]
        asked = ["many", str(written(tmp_path)), "--scheduler", address, "--out", str(tmp_path / "out"), "--quiet"]
        done = CliRunner().invoke(cli, asked)
        assert (done.exit_code, done.output) == (0, "")
        same_tables(tmp_path / "out", serial)
        assert all(one.poll() is None for one in started)  # they are not ours to end
    finally:
        for one in started[::-1]:
            one.kill()
            one.wait(timeout=20)


def test_a_scheduler_that_does_not_answer_is_one_sentence(tmp_path, monkeypatch):
    monkeypatch.setattr(many_dask, "ANSWER", 0.5)
    asked = ["many", str(written(tmp_path)), "--scheduler", "tcp://127.0.0.1:9", "--out", str(tmp_path / "out")]
    done = CliRunner().invoke(cli, asked)
    assert done.exit_code == 2
    assert done.output.startswith("Error: --scheduler: must be the address of a running dask scheduler")
    assert done.output.count("\n") == 1
