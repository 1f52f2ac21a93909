"""A study killed at random instants and gone on with finds, to the bit, what an undisturbed one finds."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from farhold.study.campaign import run_campaign
from farhold.study.status import status

HERE = str(Path(__file__).parents[1] / "study" / "campaign")
if HERE not in sys.path:
    sys.path.insert(0, HERE)

RUN = f"""
import sys
sys.path.insert(0, {HERE!r})
from artificial import artificial
from farhold.errors import FarholdError
from farhold.study.campaign import run_campaign

class Says:
    def note(self, text): pass
    def stage(self, name, total=None): print("begins", flush=True)
    def advance(self, steps=1): pass

if __name__ == "__main__":
    folder, cluster, chunks = sys.argv[1], sys.argv[2] or None, int(sys.argv[3])
    study, words = artificial(chunks=chunks, pause_s=0.03), ("farhold", "drift", "a.toml")
    try:
        options = {{"folder": folder, "resume": True, "cluster": cluster, "words": words, "watch": Says()}}
        print(run_campaign(study, **options).digest)
    except FarholdError as error:
        print(error)
        sys.exit(error.exit_code)
"""


@pytest.fixture
def begun(tmp_path):
    """Begins the study in a process of its own and waits for its chunks: begun(folder, cluster, chunks)."""
    script = tmp_path / "run.py"
    script.write_text(RUN)
    processes = []

    def begin(folder, cluster="", chunks=24):
        words = [sys.executable, str(script), str(folder), cluster, str(chunks)]
        pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE, "text": True}
        process = subprocess.Popen(words, start_new_session=True, **pipes)
        processes.append(process)
        assert process.stdout.readline() == "begins\n"
        return process

    yield begin
    for process in processes:
        process.kill()
        process.wait()
        process.stdout.close()
        process.stderr.close()


@pytest.fixture
def artificial():
    from artificial import artificial

    return artificial


@pytest.mark.parametrize("seed", [2035])
def test_three_kills_of_the_process_change_no_bit(tmp_path, begun, artificial, seed):
    folder, done = tmp_path / "study", [0]
    for wait_s in np.random.default_rng(seed).uniform(0.05, 0.35, 3):
        process = begun(folder)
        time.sleep(wait_s)
        process.send_signal(signal.SIGKILL)
        process.wait()
        seen = status(folder)
        assert seen["state"] == "stopped"
        done.append(seen["done"])
    assert done == sorted(done)
    assert 0 < done[-1] < 24
    last = begun(folder)
    assert last.communicate()[0].strip() == run_campaign(artificial(chunks=24)).digest
    assert last.returncode == 0
    assert status(folder)["state"] == "finished"


def test_kill_of_the_process_with_its_workers_changes_no_bit(tmp_path, begun, artificial):
    pytest.importorskip("distributed")
    folder = tmp_path / "study"
    process = begun(folder, "local:2", chunks=80)
    deadline_s = time.monotonic() + 10.0
    while time.monotonic() < deadline_s and len(list((folder / "chunks").glob("*.parquet"))) < 5:
        time.sleep(0.02)
    process.send_signal(signal.SIGKILL)
    process.wait()
    assert status(folder)["state"] == "stopped"
    findings = run_campaign(artificial(chunks=80), folder=folder, resume=True)
    assert findings.digest == run_campaign(artificial(chunks=80)).digest


@pytest.mark.parametrize("cluster", ["", "local:2"], ids=["here", "workers"])
def test_ctrl_c_ends_in_one_sentence_and_loses_nothing(tmp_path, begun, cluster):
    if cluster:
        pytest.importorskip("distributed")
    folder = tmp_path / "study"
    process = begun(folder, cluster, chunks=400)
    deadline_s = time.monotonic() + 10.0
    while time.monotonic() < deadline_s and status(folder)["done"] < 3:
        time.sleep(0.02)
    # a terminal sends it to the workers too
    os.killpg(process.pid, signal.SIGINT)
    said, complaints = process.communicate(timeout=20.0)
    seen = status(folder)
    assert (process.returncode, complaints) == (130, "")
    assert (seen["state"], seen["resume"]) == ("stopped", f"farhold drift a.toml -o {folder} --resume")
    assert said == f"{folder}: interrupted; {seen['done']} of 400 chunks are kept (go on with: {seen['resume']})\n"


def test_kill_of_a_worker_changes_no_bit(tmp_path, artificial):
    pytest.importorskip("distributed")
    marks = tmp_path / "marks"
    marks.mkdir()
    killed = []

    class Kills:
        def note(self, text):
            pass

        def stage(self, name, total=None):
            pass

        def advance(self, steps=1):
            newest = max(marks.iterdir(), key=lambda path: int(path.name.split("-")[2]))
            pid = int(newest.name.split("-")[1])
            if len(killed) < 1 and len(list(marks.iterdir())) >= 3:
                killed.append(pid)
                os.kill(pid, signal.SIGKILL)

    study = artificial(chunks=12, pause_s=0.1, marks=str(marks))
    findings = run_campaign(study, folder=tmp_path / "study", cluster="local:2", watch=Kills())
    assert killed != []
    assert killed[0] != os.getpid()
    assert findings.digest == run_campaign(artificial(chunks=12)).digest
    pids = {int(path.name.split("-")[1]) for path in marks.iterdir()}
    assert len(pids) > 2 or len(list(marks.iterdir())) > 12
