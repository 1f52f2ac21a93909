"""The program as a process: broken pipes are quiet, the module runs."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

CLOSED = """
import os, sys, types
sys.modules["farhold.study.start"] = types.SimpleNamespace(start=lambda folder, force: ["x.toml"] * 9000)
from farhold.interfaces.cli import main
reader, writer = os.pipe()
os.close(reader)
os.dup2(writer, 1)
sys.exit(main({words!r}))
"""


@pytest.mark.parametrize(
    "words", [["--help"], ["start", "x"], ["start", "x", "--json"]], ids=["help", "text", "json"]
)
def test_broken_pipe_is_quiet(words):
    done = subprocess.run(
        [sys.executable, "-c", CLOSED.format(words=words)], capture_output=True, text=True, check=False
    )
    assert (done.returncode, done.stderr) == (0, "")


def test_module_runs_as_the_command_does():
    done = subprocess.run([sys.executable, "-m", "farhold", "qoute"], capture_output=True, text=True, check=False)
    assert done.returncode == 2
    assert done.stdout == ""
    assert "did you mean 'quote'?" in done.stderr


LETTERS = """
import sys, types
sys.modules["farhold.study.start"] = types.SimpleNamespace(start=lambda folder, force: ["d\u00fcne.toml"])
from farhold.interfaces.cli import main
sys.exit(main(["start", "x"]))
"""


def test_terminal_without_the_letter_gets_its_number():
    done = subprocess.run(
        [sys.executable, "-c", LETTERS],
        capture_output=True,
        text=True,
        check=False,
        env={**os.environ, "PYTHONIOENCODING": "ascii"},
    )
    assert (done.returncode, done.stderr) == (0, "")
    assert "d\\xfcne.toml" in done.stdout


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="this system has no /dev/full")
def test_full_disk_under_standard_output_is_one_sentence():
    with open("/dev/full", "w") as full:
        done = subprocess.run(
            [sys.executable, "-m", "farhold", "--help"],
            stdout=full,
            stderr=subprocess.PIPE,
            text=True,
            check=False,
        )
    assert done.returncode == 1
    assert done.stderr.count("\n") == 1
    assert "No space left on device" in done.stderr


ASLEEP = """
import os, signal, sys, threading, time, types
def start(folder, force):
    threading.Timer(0.1, os.kill, (os.getpid(), signal.SIGINT)).start()
    time.sleep(30)
sys.modules["farhold.study.start"] = types.SimpleNamespace(start=start)
from farhold.interfaces.cli import main
sys.exit(main(["start", "x"]))
"""


def test_interrupt_is_one_word_and_exit_130():
    done = subprocess.run([sys.executable, "-c", ASLEEP], capture_output=True, text=True, check=False, timeout=20)
    assert (done.returncode, done.stdout, done.stderr) == (130, "", "farhold: interrupted\n")
