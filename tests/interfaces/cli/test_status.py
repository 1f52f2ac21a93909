"""``farhold status``: the state of a study's folder, as text and as JSON; and the options that studies share."""

import json
import os
import shlex
import sys
from pathlib import Path

import click
import pytest
from click.testing import CliRunner

from farhold.files import FolderLock
from farhold.interfaces.cli import cli, main
from farhold.interfaces.cli.options import force, going, manner, out, samples, seed

STUDY = str(Path(__file__).parents[2] / "study" / "campaign")
if STUDY not in sys.path:
    sys.path.insert(0, STUDY)
WORDS = ("farhold", "drift", "my case.toml", "--formation", "wide")


class Stops:
    def __init__(self, after):
        self.left = after

    def note(self, text):
        pass

    def stage(self, name, total=None):
        pass

    def advance(self, steps=1):
        self.left -= 1
        if self.left == 0:
            raise KeyboardInterrupt


@pytest.fixture
def kept(tmp_path):
    """Keeps the artificial study in a folder, stopped after some chunks: kept(after=None)."""
    from artificial import artificial

    from farhold.study.campaign import InterruptedStudyError, run_campaign

    def keep(after=None, words=WORDS):
        folder = tmp_path / "my study"
        try:
            run_campaign(artificial(), folder=folder, words=words, watch=Stops(after or 0))
        except InterruptedStudyError:
            assert after is not None
        return folder

    return keep


def said(folder):
    done = CliRunner(env={"COLUMNS": "80"}).invoke(cli, ["status", str(folder)])
    assert done.exit_code == 0, done.output
    return done.stdout


def document(folder):
    done = CliRunner().invoke(cli, ["status", str(folder), "--json"])
    assert done.exit_code == 0, done.output
    return json.loads(done.stdout)


def resume(folder):
    return f"farhold drift 'my case.toml' --formation wide -o {shlex.quote(str(folder))} --resume"


def expected(folder, **changes):
    usual = {"kind": "status", "schema": 1, "study": "artificial", "done": 4, "total": 6, "resume": resume(folder)}
    return {**usual, **changes}


def test_stopped_study_says_how_to_go_on(kept):
    folder = kept(after=4)
    assert document(folder) == expected(folder, state="stopped")


def test_finished_study_has_nothing_to_go_on_with(kept):
    folder = kept()
    assert document(folder) == expected(folder, done=6, state="finished", resume=None)


def test_all_chunks_without_findings_is_stopped(kept):
    folder = kept(after=6)
    assert document(folder) == expected(folder, done=6, state="stopped")


def test_study_held_by_a_live_process_is_running(kept):
    folder = kept(after=4)
    with FolderLock(folder):
        assert document(folder) == expected(folder, state="running", resume=None)
    assert document(folder)["state"] == "stopped"


def test_lock_of_a_dead_process_is_no_running(kept):
    import subprocess

    folder = kept(after=4)
    take = f"import os; from farhold.files import FolderLock; FolderLock({str(folder)!r}).__enter__(); os._exit(9)"
    subprocess.run([sys.executable, "-c", take], check=False)
    assert (folder / "lock").exists()
    assert document(folder)["state"] == "stopped"


def hurt_chunk(folder):
    path = sorted((folder / "chunks").iterdir())[0]
    path.write_bytes(path.read_bytes()[:-3])


def test_damaged_chunk_is_said_and_can_be_mended(kept):
    folder = kept(after=4)
    hurt_chunk(folder)
    assert document(folder) == expected(folder, done=3, state="damaged")


def test_damaged_findings_are_said_and_can_be_mended(kept):
    folder = kept()
    (folder / "rows.parquet").write_bytes(b"PAR1")
    assert document(folder) == expected(folder, done=6, state="damaged")


def test_damaged_plan_leaves_nothing_known(kept):
    folder = kept(after=4)
    (folder / "study.json").write_text("{}")
    assert document(folder) == expected(folder, study=None, done=None, total=None, state="damaged", resume=None)
    assert "study.json does not match its digest: restore it, or begin anew with" in said(folder)


def test_text_counts_the_chunks_in_eighty_columns(kept):
    folder = kept(after=4)
    lines = said(folder).splitlines()
    assert lines[0] == "artificial: stopped"
    assert "chunks      4 of 6" in lines
    assert f"            {'#' * 26}{'.' * 14} 66 %" in lines
    assert all(len(line) <= 80 for line in lines[:-1] if line != str(folder))


def test_command_that_goes_on_stands_alone_and_whole(kept):
    folder = kept(after=4)
    assert said(folder).splitlines()[-2:] == ["go on with", resume(folder)]


def test_study_begun_from_python_says_so(kept):
    folder = kept(after=4, words=())
    assert document(folder)["resume"] is None
    assert "go on       from Python, as it was begun, with resume=True" in said(folder)


def test_looking_changes_nothing(kept):
    folder = kept(after=4)
    before = {path: path.stat().st_mtime_ns for path in [folder, *folder.rglob("*")]}
    document(folder)
    assert {path: path.stat().st_mtime_ns for path in [folder, *folder.rglob("*")]} == before


@pytest.mark.parametrize(
    ("prepare", "what"),
    [
        (lambda _: None, "does not exist"),
        (lambda path: path.mkdir(), "holds no study"),
        (lambda path: path.touch(), "is a file, not the folder of a study"),
    ],
    ids=["missing", "empty", "file"],
)
def test_what_is_no_study_is_refused(tmp_path, capsys, prepare, what):
    prepare(tmp_path / "x")
    assert main(["status", str(tmp_path / "x")]) == 2
    allowed = "allowed: a folder that a study was kept in with -o DIR"
    assert capsys.readouterr().err == f"{tmp_path / 'x'}: {what} ({allowed})\n"


@click.command("drift")
@click.argument("case_file", metavar="CASE")
@click.option("--for", "span", required=True)
@samples
@seed
@going
@out("")
@force
@manner
def trial(**given):
    """Stand for the command of a study."""
    trial.given = given


def asked(*words):
    trial.main(list(words), prog_name="farhold drift", standalone_mode=False)
    return trial.given


def test_options_of_a_study_have_their_defaults():
    given = asked("a.toml", "--for", "365 d")
    how = given["going"]
    assert (given["samples"], given["seed"]) == (None, None)
    assert (how.resume, how.cluster, how.allow_mixed, how.pair_samples) == (False, None, False, 3)


def test_words_leave_out_the_folder_and_the_manner():
    given = asked(
        *("a b.toml", "--for", "365 d", "--samples", "40", "--seed", "0", "--cluster", "local:2", "--allow-mixed"),
        *("--pair-samples", "5", "-o", os.devnull, "--resume", "--force", "--json", "--quiet"),
    )
    assert list(given["going"].words) == [
        *("farhold", "drift", "a b.toml", "--for", "365 d", "--samples", "40", "--seed", "0"),
        *("--cluster", "local:2", "--allow-mixed", "--pair-samples", "5"),
    ]


def test_words_given_again_mean_the_same():
    words = list(asked("--for", "365 d", "a.toml", "--samples", "40")["going"].words)
    assert asked(*words[2:])["going"].words == tuple(words)


@pytest.mark.parametrize(
    ("option", "text", "least"), [("--samples", "0", 1), ("--seed", "-1", 0), ("--pair-samples", "two", 0)]
)
def test_wrong_number_is_refused(option, text, least):
    with pytest.raises(ValueError, match=f"{option}: got '{text}' .allowed: a whole number, {least} or above"):
        asked("a.toml", "--for", "365 d", option, text)


def test_interrupted_study_leaves_with_130_and_says_how_to_go_on(monkeypatch, capsys):
    from farhold.errors import Fault
    from farhold.study import status
    from farhold.study.campaign import InterruptedStudyError

    def stops(folder):
        raise InterruptedStudyError(Fault(folder, "interrupted; 2 of 6 chunks are kept", hint="go on with: x"))

    monkeypatch.setattr(status, "status", stops)
    assert main(["status", "d"]) == 130
    assert capsys.readouterr().err == "d: interrupted; 2 of 6 chunks are kept (go on with: x)\n"
    assert main(["status", "d", "--json"]) == 130
    assert json.loads(capsys.readouterr().out)["exit"] == 130
