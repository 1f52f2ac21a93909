import json
import os
import socket
import subprocess
import sys

import numpy as np
import pytest

from farhold import files
from farhold.errors import DomainError, FarholdError, LedgerError, OutputExistsError


def names(folder):
    return sorted(entry.name for entry in folder.iterdir())


def test_durable_write_replaces_the_file_and_leaves_nothing_beside_it(tmp_path):
    target = tmp_path / "a.json"
    files.write_bytes_durably(target, b"one")
    files.write_bytes_durably(target, b"two")
    assert target.read_bytes() == b"two"
    assert names(tmp_path) == ["a.json"]


def test_durable_write_that_fails_keeps_the_former_file(tmp_path, monkeypatch):
    target = tmp_path / "a.json"
    files.write_bytes_durably(target, b"one")

    def full(_handle):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(FarholdError, match=r"a\.json: cannot be written: the disk is full \(free some space"):
        files.write_bytes_durably(target, b"two")
    assert target.read_bytes() == b"one"
    assert names(tmp_path) == ["a.json"]


def test_durable_write_names_the_missing_folder(tmp_path):
    with pytest.raises(FarholdError, match=r"nowhere: does not exist \(allowed: an existing folder"):
        files.write_bytes_durably(tmp_path / "nowhere" / "a.json", b"")


def test_durable_write_names_a_folder_that_is_a_file(tmp_path):
    (tmp_path / "f").write_text("")
    with pytest.raises(FarholdError, match=r"f: is not a folder"):
        files.write_bytes_durably(tmp_path / "f" / "a.json", b"")


@pytest.mark.skipif(os.name == "nt" or os.geteuid() == 0, reason="root may write everywhere")
def test_durable_write_names_a_folder_that_may_not_be_written(tmp_path):
    tmp_path.chmod(0o500)
    with pytest.raises(FarholdError, match="may not be written here: permission denied"):
        files.write_bytes_durably(tmp_path / "a.json", b"")


def test_durable_folder_appears_whole(tmp_path):
    with files.durable_folder(tmp_path / "out") as aside:
        (aside / "quote.json").write_text("{}")
        assert not (tmp_path / "out").exists()
    assert names(tmp_path) == ["out"]
    assert names(tmp_path / "out") == ["quote.json"]


def test_durable_folder_that_fails_leaves_nothing(tmp_path):
    def fails():
        with files.durable_folder(tmp_path / "out") as aside:
            (aside / "quote.json").write_text("{}")
            raise KeyError

    with pytest.raises(KeyError):
        fails()
    assert names(tmp_path) == []


def test_durable_folder_takes_an_empty_folder(tmp_path):
    (tmp_path / "out").mkdir()
    with files.durable_folder(tmp_path / "out") as aside:
        (aside / "a").write_text("")
    assert names(tmp_path / "out") == ["a"]


def test_durable_folder_refuses_what_exists(tmp_path):
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "a").write_text("old")
    with (
        pytest.raises(OutputExistsError, match=r"out: exists already \(--force replaces it"),
        files.durable_folder(tmp_path / "out"),
    ):
        pass
    with files.durable_folder(tmp_path / "out", force=True) as aside:
        (aside / "a").write_text("new")
    assert (tmp_path / "out" / "a").read_text() == "new"
    assert names(tmp_path) == ["out"]


def test_durable_folder_never_deletes_what_it_did_not_write(tmp_path):
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "thesis.tex").write_text("precious")

    def forced():
        with files.durable_folder(tmp_path / "out", force=True) as aside:
            (aside / "a").write_text("new")

    with pytest.raises(OutputExistsError, match=r"holds 'thesis.tex', which this output does not replace"):
        forced()
    assert (tmp_path / "out" / "thesis.tex").read_text() == "precious"
    assert names(tmp_path) == ["out"]


def test_durable_folder_refuses_a_file(tmp_path):
    (tmp_path / "out").write_text("x")
    with (
        pytest.raises(OutputExistsError, match="is a file, not a folder"),
        files.durable_folder(tmp_path / "out", force=True),
    ):
        pass


def test_digest_does_not_depend_on_the_order_of_keys():
    one = {"a": 1.5, "b": [np.float64(0.1), np.int64(2)], "c": np.array([1.0])}
    other = {"c": [1.0], "b": [0.1, 2], "a": 1.5}
    assert files.digest_of(one) == files.digest_of(other)


def test_digest_tells_neighbouring_numbers_apart():
    assert files.digest_of(0.1) != files.digest_of(np.nextafter(0.1, 1.0))


@pytest.mark.parametrize("value", [float("nan"), float("inf"), {"a": object()}])
def test_digest_refuses_what_has_no_canonical_form(value):
    with pytest.raises(DomainError, match="digest: the data has no canonical form"):
        files.digest_of(value)


def test_sha256_is_that_of_the_standard():
    # FIPS 180-4 example, "abc"
    expected = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert files.sha256_hex(b"abc") == expected


def test_lock_names_the_owner_that_holds_it(tmp_path):
    with (
        files.FolderLock(tmp_path),
        pytest.raises(LedgerError, match=rf"is being written by process {os.getpid()} on .* since 20") as caught,
        files.FolderLock(tmp_path),
    ):
        pass
    assert caught.value.exit_code == 4
    assert names(tmp_path) == []


def dead_pid():
    done = subprocess.run([sys.executable, "-c", "import os; print(os.getpid())"], capture_output=True, check=True)
    return int(done.stdout)


@pytest.mark.skipif(os.name == "nt", reason="a dead process cannot be told there")
@pytest.mark.parametrize("started", [None, "1"])
def test_lock_of_a_dead_process_is_recovered(tmp_path, started):
    pid = dead_pid() if started is None else os.getpid()
    if started and not os.path.exists("/proc/self/stat"):
        pytest.skip("the system does not say when a process began")
    owner = {"pid": pid, "host": socket.gethostname(), "started": started, "token": "x"}
    (tmp_path / "lock").write_text(json.dumps(owner))
    with files.FolderLock(tmp_path):
        assert json.loads((tmp_path / "lock").read_text())["pid"] == os.getpid()
    assert names(tmp_path) == []


@pytest.mark.parametrize("text", ["", json.dumps({"pid": 1, "host": "elsewhere.invalid"})])
def test_lock_of_another_host_or_of_nobody_is_not_taken(tmp_path, text):
    (tmp_path / "lock").write_text(text)
    with (
        pytest.raises(LedgerError, match="if it is certainly dead, delete 'lock' there"),
        files.FolderLock(tmp_path),
    ):
        pass
    assert (tmp_path / "lock").read_text() == text


def test_lock_names_a_missing_folder(tmp_path):
    with pytest.raises(FarholdError, match="nowhere: does not exist"), files.FolderLock(tmp_path / "nowhere"):
        pass
