"""The journal: nothing finished is lost or computed again, and every stop says how to go on."""

import errno
import json
import os
import shutil
import time

import numpy as np
import pytest

from farhold.errors import CaseError, DomainError, FarholdError, OutputExistsError
from farhold.files import FolderLock, durable
from farhold.study.campaign import Findings, InterruptedStudyError, check_folder, chunk_rng, journal, run_campaign
from farhold.study.campaign import plan as plan_module

WORDS = ("farhold", "drift", "my case.toml", "--formation", "wide")


@pytest.fixture
def marks(tmp_path):
    """A folder in which each computed chunk leaves a mark; called, it tells which were computed."""
    folder = tmp_path / "marks"
    folder.mkdir()

    def computed():
        seen = sorted(int(path.name.split("-")[0]) for path in folder.iterdir())
        shutil.rmtree(folder)
        folder.mkdir()
        return seen

    computed.folder = str(folder)
    return computed


@pytest.fixture
def stopped(tmp_path, artificial, listener):
    """A study of six chunks, stopped after three."""
    folder = tmp_path / "study"
    with pytest.raises(InterruptedStudyError):
        run_campaign(artificial(), folder=folder, words=WORDS, watch=listener(stop_after=3))
    return folder


def chunk_files(folder):
    return sorted(path for path in (folder / "chunks").iterdir())


def content(folder):
    """All bytes of a study, without the seconds that it took."""
    files = {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}
    result = json.loads(files.pop("result.json"))
    seal = json.loads(files.pop("finished.json"))
    del result["seconds"], seal["files"]["result.json"]
    return files, result, seal


def test_kept_study_finds_what_one_in_memory_finds(tmp_path, artificial, undisturbed):
    kept = run_campaign(artificial(), folder=tmp_path / "study")
    assert kept.digest == undisturbed.digest
    assert undisturbed.summary["order"] == [0, 1, 2, 3, 4, 5]


def test_folder_of_a_resumed_study_equals_the_undisturbed_one(tmp_path, stopped, artificial):
    whole = tmp_path / "whole"
    run_campaign(artificial(), folder=whole, words=WORDS)
    run_campaign(artificial(), folder=stopped, resume=True, words=WORDS)
    assert content(stopped) == content(whole)


@pytest.mark.parametrize("stop_after", [1, 5, 6])
def test_finished_chunks_are_never_computed_again(tmp_path, marks, artificial, listener, undisturbed, stop_after):
    study, folder = artificial(marks=marks.folder), tmp_path / "study"
    with pytest.raises(InterruptedStudyError):
        run_campaign(study, folder=folder, watch=listener(stop_after=stop_after))
    assert marks() == list(range(stop_after))
    assert run_campaign(study, folder=folder, resume=True).digest == undisturbed.digest
    assert marks() == list(range(stop_after, 6))


def test_interrupt_says_what_is_kept_and_how_to_go_on(tmp_path, artificial, listener):
    folder = tmp_path / "my study"
    with pytest.raises(InterruptedStudyError) as caught:
        run_campaign(artificial(), folder=folder, words=WORDS, watch=listener(stop_after=2))
    assert str(caught.value) == (
        f"{folder}: interrupted; 2 of 6 chunks are kept (go on with: farhold drift 'my case.toml' "
        f"--formation wide -o '{folder}' --resume)"
    )
    assert caught.value.exit_code == 130


def test_interrupt_in_memory_says_how_to_keep(artificial, listener):
    with pytest.raises(InterruptedStudyError, match=r"2 of 6 chunks were done and nothing is kept \(-o DIR keeps"):
        run_campaign(artificial(), watch=listener(stop_after=2))


def test_interrupt_from_python_says_so(tmp_path, artificial, listener):
    with pytest.raises(InterruptedStudyError, match=r"\(call it again with resume=True to go on\)"):
        run_campaign(artificial(), folder=tmp_path / "s", watch=listener(stop_after=1))


@pytest.mark.parametrize("prepare", [lambda _: None, lambda path: path.mkdir()], ids=["missing", "empty"])
def test_resume_starts_afresh(tmp_path, artificial, undisturbed, prepare):
    prepare(tmp_path / "study")
    assert run_campaign(artificial(), folder=tmp_path / "study", resume=True).digest == undisturbed.digest


def test_resume_of_a_finished_study_gives_its_findings(tmp_path, marks, artificial, listener):
    study, watch = artificial(marks=marks.folder), listener()
    first = run_campaign(study, folder=tmp_path / "study")
    marks()
    again = run_campaign(study, folder=tmp_path / "study", resume=True, watch=watch)
    assert (again.summary, again.notes) == (first.summary, first.notes)
    assert again.tables["rows"].equals(first.tables["rows"])
    assert marks() == []
    assert watch.notes == ["the study is finished; these are the findings it kept"]


def test_resume_without_a_folder_is_refused(artificial):
    with pytest.raises(CaseError, match=r"--resume: needs the folder of the study \(give it with -o DIR\)"):
        run_campaign(artificial(), resume=True)


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"size": 51}, "size: the study was begun with 50, now 51 is asked"),
        ({"seed": 8}, "seed: the study was begun with 7, now 8 is asked"),
        ({"chunks": 7}, "chunks: the study was begun with 6, now 7 is asked"),
        ({"options": {"policy": "box2"}}, "options.policy: the study was begun with 'box', now 'box2' is asked"),
        ({"options": {"box_m": 10.0}}, "options.box_m: the study was begun with nothing, now 10.0 is asked"),
    ],
    ids=["size", "seed", "chunks", "nested", "new"],
)
def test_resume_with_other_inputs_names_them(stopped, artificial, change, said):
    before = {path: path.read_bytes() for path in stopped.rglob("*") if path.is_file()}
    with pytest.raises(CaseError) as caught:
        run_campaign(artificial(**change), folder=stopped, resume=True)
    assert str(caught.value) == f"{stopped}: {said}"
    assert {path: path.read_bytes() for path in stopped.rglob("*") if path.is_file()} == before


def test_resume_with_several_other_inputs_names_all(stopped, artificial):
    with pytest.raises(CaseError) as caught:
        run_campaign(artificial(size=51, seed=9), folder=stopped, resume=True)
    assert [fault.where for fault in caught.value.faults] == [f"{stopped}: size", f"{stopped}: seed"]


@pytest.fixture
def other_machine(monkeypatch):
    here = dict(plan_module._machine())
    features = here["cpu_features"].split()[1:]
    there = {**here, "numpy": "1.99.0", "cpu_features": " ".join([*features, "warp9"])}
    monkeypatch.setattr(plan_module, "_machine", lambda: tuple(there.items()))
    return here


def test_resume_on_another_machine_is_refused(stopped, artificial, other_machine):
    with pytest.raises(CaseError) as caught:
        run_campaign(artificial(), folder=stopped, resume=True)
    lacks = other_machine["cpu_features"].split()[0]
    numpy = other_machine["numpy"]
    cure = "the bits may differ; --allow-mixed goes on, equal to tolerance only"
    assert str(caught.value).splitlines() == [
        f"{stopped}: machine.cpu_features: this machine lacks {lacks} and has besides warp9 ({cure})",
        f"{stopped}: machine.numpy: this machine has 1.99.0, the study was begun with {numpy} ({cure})",
    ]


def test_resume_on_another_machine_can_be_allowed(stopped, artificial, other_machine, undisturbed):
    assert run_campaign(artificial(), folder=stopped, resume=True, allow_mixed=True).digest == undisturbed.digest


def test_folder_in_use_is_refused_without_resume(stopped, artificial):
    with pytest.raises(
        OutputExistsError, match=r"exists already and is not empty \(--resume goes on with it, --force"
    ):
        run_campaign(artificial(), folder=stopped)


def test_force_begins_anew(stopped, artificial):
    findings = run_campaign(artificial(seed=8), folder=stopped, force=True)
    assert findings.digest == run_campaign(artificial(seed=8)).digest
    assert len(chunk_files(stopped)) == 6


@pytest.mark.parametrize("manner", [{"resume": True}, {"force": True}], ids=["resume", "force"])
def test_folder_of_something_else_is_never_touched(tmp_path, artificial, manner):
    (tmp_path / "thesis.parquet").write_text("mine")
    with pytest.raises(OutputExistsError, match=r"holds 'thesis\.parquet', which is no part of a study"):
        run_campaign(artificial(), folder=tmp_path, **manner)
    assert (tmp_path / "thesis.parquet").read_text() == "mine"


def test_file_is_no_folder(tmp_path):
    (tmp_path / "f").touch()
    with pytest.raises(OutputExistsError, match="is a file, not a folder"):
        check_folder(tmp_path / "f", resume=True)


def test_missing_parent_is_said(tmp_path, artificial):
    with pytest.raises(FarholdError, match=r"nowhere: does not exist \(create the folder first\)"):
        run_campaign(artificial(), folder=tmp_path / "nowhere" / "study")


def test_second_process_is_kept_out(stopped, artificial):
    with FolderLock(stopped), pytest.raises(CaseError, match=f"is being written by process {os.getpid()} on "):
        run_campaign(artificial(), folder=stopped, resume=True)


def shorten(path):
    path.write_bytes(path.read_bytes()[:-20])


def flip(path):
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 4
    path.write_bytes(data)


@pytest.mark.parametrize("harm", [shorten, flip, lambda path: path.write_bytes(b"")], ids=["cut", "flip", "empty"])
def test_damaged_chunk_is_computed_again(stopped, marks, artificial, listener, undisturbed, harm):
    hurt, watch = chunk_files(stopped)[1], listener()
    harm(hurt)
    findings = run_campaign(artificial(marks=marks.folder), folder=stopped, resume=True, watch=watch)
    assert findings.digest == undisturbed.digest
    assert marks() == [1, 3, 4, 5]
    assert f"{hurt.name} is damaged; it is computed again" in watch.notes
    assert hurt.exists()


def test_chunk_of_another_study_is_computed_again(tmp_path, stopped, artificial, undisturbed):
    run_campaign(artificial(seed=8), folder=tmp_path / "other")
    chunk_files(stopped)[2].unlink()
    shutil.copy(chunk_files(tmp_path / "other")[2], stopped / "chunks")
    assert run_campaign(artificial(), folder=stopped, resume=True).digest == undisturbed.digest


@pytest.mark.parametrize("name", ["result.json", "rows.parquet", "finished.json"])
def test_damaged_findings_are_made_again_from_the_chunks(tmp_path, marks, artificial, undisturbed, name):
    study, folder = artificial(marks=marks.folder), tmp_path / "study"
    run_campaign(study, folder=folder)
    marks()
    shorten(folder / name)
    assert run_campaign(study, folder=folder, resume=True).digest == undisturbed.digest
    assert marks() == []


def test_damaged_plan_is_refused(stopped, artificial):
    flip(stopped / "study.json")
    with pytest.raises(CaseError, match=r"study.json: is damaged: .* \(restore it, or begin anew with --force\)"):
        run_campaign(artificial(), folder=stopped, resume=True)


def test_litter_of_a_killed_process_is_swept(stopped, artificial):
    litter = [stopped / ".study.json.0123.aside", stopped / "chunks" / ".chunk-000004-00.parquet.0123.aside"]
    for path in litter:
        path.write_bytes(b"half")
    run_campaign(artificial(), folder=stopped, resume=True)
    assert [path for path in litter if path.exists()] == []


@pytest.mark.parametrize(
    ("code", "said"),
    [
        (errno.ENOSPC, "cannot be written: the disk is full (free some space and run it again; "),
        (errno.EROFS, "lies on a read-only file system (choose another folder; "),
        (errno.EIO, "cannot be used: Input/output error ("),
    ],
)
def test_failing_disk_loses_nothing(tmp_path, artificial, undisturbed, monkeypatch, code, said):
    folder, real, written = tmp_path / "study", os.fsync, []

    def fails_later(handle):
        written.append(handle)
        if len(written) > 8:
            raise OSError(code, os.strerror(code))
        real(handle)

    monkeypatch.setattr(durable.os, "fsync", fails_later)
    with pytest.raises(FarholdError) as caught:
        run_campaign(artificial(), folder=folder, words=WORDS)
    monkeypatch.undo()
    kept = len(chunk_files(folder))
    assert 0 < kept < 6
    assert said in str(caught.value)
    assert f"{kept} of 6 chunks are kept; go on with: farhold drift 'my case.toml'" in str(caught.value)
    assert [path.name for path in folder.rglob("*") if path.name.startswith(".")] == []
    assert run_campaign(artificial(), folder=folder, resume=True).digest == undisturbed.digest


def test_folder_that_may_not_be_written_is_said_at_once(tmp_path, artificial, monkeypatch):
    def refuses(*_, **__):
        raise PermissionError(errno.EACCES, "Permission denied", str(tmp_path / "study"))

    monkeypatch.setattr("pathlib.Path.mkdir", refuses)
    with pytest.raises(FarholdError, match="study: may not be written here: permission denied"):
        run_campaign(artificial(), folder=tmp_path / "study")


def test_folder_deleted_underway_is_said(tmp_path, artificial, listener, undisturbed):
    folder, watch = tmp_path / "study", listener()
    watch.advance = lambda steps=1: shutil.rmtree(folder, ignore_errors=True)
    with pytest.raises(FarholdError) as caught:
        run_campaign(artificial(), folder=folder, words=WORDS, watch=watch)
    assert str(caught.value).startswith(
        f"{folder}: the folder was deleted while the study ran (0 of 6 chunks are kept; go on with: farhold drift"
    )
    assert run_campaign(artificial(), folder=folder, resume=True).digest == undisturbed.digest


def test_clock_set_back_changes_nothing(stopped, artificial, undisturbed, monkeypatch):
    monkeypatch.setattr(time, "time", lambda: 0.0)
    monkeypatch.setattr(time, "time_ns", lambda: 0)
    assert run_campaign(artificial(), folder=stopped, resume=True).digest == undisturbed.digest


def test_chunk_lost_before_its_turn_is_computed_again(tmp_path, artificial, listener, undisturbed, monkeypatch):
    class Backwards:
        def run(self, job, wanted, note):
            for index in reversed(wanted):
                yield index, job.perform(index)

    folder, watch = tmp_path / "study", listener()

    def harm(steps=1):
        if len(chunk_files(folder)) == 3:
            shorten(chunk_files(folder)[0])

    watch.advance = harm
    monkeypatch.setattr(journal, "engine_for", lambda cluster: Backwards())
    assert run_campaign(artificial(), folder=folder, watch=watch).digest == undisturbed.digest
    assert "chunk 3 cannot be read back; it is computed again" in watch.notes


def test_progress_counts_what_is_left(stopped, artificial, listener):
    watch = listener()
    run_campaign(artificial(), folder=stopped, resume=True, watch=watch)
    assert watch.stages == [("chunks of artificial", 3)]
    assert watch.done == 3
    assert watch.notes == ["3 of 6 chunks are here already"]


def test_plan_names_no_host_and_no_folder(stopped):
    text = (stopped / "study.json").read_text()
    assert str(stopped) not in text
    assert set(json.loads(text)) == {
        *("kind", "schema", "study", "inputs", "seed", "chunks", "machine", "words", "digest"),
    }


def test_findings_digest_leaves_out_the_seconds():
    assert Findings({"a": 1, "seconds": 2}).digest == Findings({"a": 1}).digest
    assert Findings({"a": 1}).digest != Findings({"a": 2}).digest


@pytest.mark.parametrize(("change", "said"), [({"chunks": 0}, "chunks: got 0"), ({"seed": -1}, "seed: got -1")])
def test_unlawful_campaign_is_refused(artificial, change, said):
    with pytest.raises(DomainError, match=said):
        artificial(**change)


def test_chunks_are_drawn_independently():
    draws = np.array([chunk_rng(seed, index).standard_normal(4000) for seed in (1, 2) for index in range(4)])
    correlation = np.corrcoef(draws) - np.eye(8)
    # 28 pairs, each with deviation 1/sqrt(4000) = 0.016: 4.5 of them
    assert np.abs(correlation).max() < 0.071
    assert chunk_rng(1, 2, 3).random() == chunk_rng(1, 2, 3).random()
