import json

import numpy as np
import pyarrow.parquet as pq
import pytest

from farhold.errors import DomainError, FarholdError, LedgerError
from farhold.files import digest_of
from farhold.ledger import Book, NewEntries, schema, store
from farhold.ledger.audit import audit


@pytest.fixture
def written(book):
    """A book of three commits."""
    for node in ("H0", "P00002"):
        book.commit(NewEntries.of(node, book.last_epoch, "hold", 0.5))
    return book


def segment(book, number, kind):
    return book.path / book.commits[number].files[kind].name


def test_head_names_every_file_of_the_folder(written):
    on_disk = {entry.name for entry in written.path.iterdir()}
    named = {one.name for record in written.commits for one in record.files.values()}
    assert on_disk - named == {"head.json"} | {n for n in on_disk if n.startswith("terms-")}
    assert len(named) == 12


def test_half_written_segments_are_invisible_and_swept_by_the_next_writer(written):
    head = written.head
    half = (".head.json.0123456789ab.aside", "000003-0123456789ab-entries.parquet")
    for name in half:
        (written.path / name).write_bytes(b"PAR1 half")
    (written.path / "notes.txt").write_text("mine")
    reader = Book.open(written.path)
    assert reader.head == head
    assert len(reader.entries()) == 8
    assert "2 left by an unfinished commit" in audit(written.path).set_index("check").loc["files", "detail"]
    reader.commit(NewEntries.of("H1", reader.last_epoch, "hold", 0.1))
    left = {entry.name for entry in written.path.iterdir()}
    assert not left & set(half)
    assert "notes.txt" in left


@pytest.mark.parametrize("fails_at", range(1, 6))
def test_commit_that_fails_anywhere_leaves_the_ledger_as_it_was(written, monkeypatch, fails_at):
    before = {entry.name: entry.read_bytes() for entry in written.path.iterdir()}
    calls = []
    whole = store.write_bytes_durably

    def fails(path, data):
        calls.append(path)
        if len(calls) == fails_at:
            raise FarholdError([])
        whole(path, data)

    monkeypatch.setattr(store, "write_bytes_durably", fails)
    with pytest.raises(FarholdError):
        written.commit(NewEntries.of("H0", written.last_epoch, "hold", 0.5))
    assert {entry.name: entry.read_bytes() for entry in written.path.iterdir()} == before


@pytest.mark.parametrize("kind", ["entries", "roster", "balances"])
def test_truncated_segment_is_one_sentence(written, kind):
    path = segment(written, 2, kind)
    path.write_bytes(path.read_bytes()[:-20])
    read = {"entries": written.entries, "roster": written.roster, "balances": written.balances}[kind]
    with pytest.raises(LedgerError) as caught:
        read()
    assert caught.value.exit_code == 4
    assert str(caught.value).startswith(f"{path}: cannot be read: the segment is cut short or damaged (restore")
    assert "\n" not in str(caught.value)


def test_truncated_segment_is_one_sentence_in_a_statement(written):
    path = segment(written, 2, "entries")
    path.write_bytes(path.read_bytes()[:-20])
    with pytest.raises(LedgerError, match="the segment is cut short or damaged"):
        written.statement("H0")


@pytest.mark.parametrize("whole", [True, False])
def test_missing_segment_is_named(written, whole):
    path = segment(written, 1, "entries")
    path.unlink()
    with pytest.raises(LedgerError, match=f"{path.name}: is missing, though the head names it"):
        written.entries(None if whole else ["H0"])


def test_segment_of_other_columns_is_named(written):
    path = segment(written, 2, "balances")
    path.write_bytes(segment(written, 2, "roster").read_bytes())
    with pytest.raises(LedgerError, match="has other columns than a ledger's segment"):
        written.balances()


def test_missing_ledger_is_bad_input(tmp_path):
    with pytest.raises(DomainError, match=r"nowhere: does not exist \(allowed: the folder of a ledger") as caught:
        Book.open(tmp_path / "nowhere")
    assert caught.value.exit_code == 2


def test_folder_that_is_no_ledger_is_bad_input(tmp_path):
    with pytest.raises(DomainError, match=r"is not a ledger: it holds no head.json"):
        Book.open(tmp_path)


def test_file_in_place_of_a_ledger_is_bad_input(tmp_path):
    (tmp_path / "f").write_text("")
    with pytest.raises(DomainError, match="f: is a file"):
        Book.open(tmp_path / "f")


def test_missing_head_among_segments_is_damage(written):
    (written.path / "head.json").unlink()
    with pytest.raises(LedgerError, match=r"head.json: the head file is missing"):
        Book.open(written.path)


@pytest.mark.parametrize("keep", [0, 1, 100, -5])
def test_truncated_head_is_damage(written, keep):
    path = written.path / "head.json"
    path.write_bytes(path.read_bytes()[:keep])
    with pytest.raises(LedgerError, match=r"head.json: is cut short or damaged"):
        Book.open(written.path)


@pytest.mark.parametrize(
    "content", [b"[]", b"null", b"{}", b"\xff\xfe", b'{"format":"farhold-ledger","schema":1}']
)
def test_head_of_other_content_is_damage(written, content):
    (written.path / "head.json").write_bytes(content)
    with pytest.raises(LedgerError, match=r"head.json: is cut short or damaged"):
        Book.open(written.path)


def test_edited_head_is_damage(written):
    path = written.path / "head.json"
    path.write_bytes(path.read_bytes().replace(b'"kind":"commit"', b'"kind":"post"', 1))
    with pytest.raises(LedgerError, match="its content does not match its own check sum"):
        Book.open(written.path)


def test_newer_schema_is_refused_with_both_versions(written):
    path = written.path / "head.json"
    path.write_bytes(path.read_bytes().replace(b'"schema":1', b'"schema":2'))
    with pytest.raises(LedgerError, match=r"has the ledger schema 2 \(allowed: schema 1; use the farhold"):
        Book.open(written.path)


def test_damaged_terms_are_named(written):
    path = next(written.path.glob("terms-*.json"))
    path.write_bytes(path.read_bytes()[:50])
    with pytest.raises(LedgerError, match=r"terms-.*json: is cut short or damaged"):
        Book.open(written.path)


def test_entries_are_stored_in_blocks_of_two_thousand_nodes(tmp_path, make_swarm, make_terms):
    swarm = make_swarm(4100)
    book = Book.create(tmp_path / "b", make_terms(swarm), swarm)
    twice = np.repeat(swarm.node, 2)
    book.commit(NewEntries.of(twice, book.last_epoch, "hold", 0.01))
    meta = pq.read_metadata(segment(book, 1, "entries"))
    assert [meta.row_group(k).num_rows for k in range(meta.num_row_groups)] == [4000, 4000, 200]
    assert book.entries(["P04099", "H0"])["node"].tolist() == ["H0", "P04099", "H0", "H0", "P04099", "P04099"]


CHECKS = ["head", "files", "terms", "entries", "corrections", "roster", "balances", "digests"]


def reseal(book, number, kind, table):
    """Put another table in place of a segment and make the head's check sums fit it."""
    path = segment(book, number, kind)
    pq.write_table(table, path)
    head = json.loads((book.path / "head.json").read_bytes())
    head.pop("check")
    head["commits"][number]["files"][kind]["sha256"] = store.sha256_hex(path.read_bytes())
    (book.path / "head.json").write_text(json.dumps({**head, "check": digest_of(head)}))


def replaced(table, name, row, value):
    columns = {one: table.column(one).to_pylist() for one in table.schema.names}
    columns[name][row] = value
    at = table.schema.get_field_index(name)
    return table.set_column(at, table.schema.field(at), store.pa.array(columns[name], table.schema.field(at).type))


def test_audit_of_a_sound_book_lists_its_checks(written):
    written.correct(6, "wrong")
    rows = audit(written.path)
    assert list(rows.columns) == ["check", "result", "detail"]
    assert rows["result"].eq("ok").all()
    assert rows["check"].tolist() == CHECKS


@pytest.mark.parametrize("kind", ["entries", "roster", "balances", "demand"])
def test_audit_catches_one_flipped_bit_in_any_segment(written, kind):
    path = segment(written, 1, kind)
    data = bytearray(path.read_bytes())
    data[len(data) // 3] ^= 0x10
    path.write_bytes(data)
    with pytest.raises(LedgerError, match=f"{path.name}: its bytes are not those that were committed") as caught:
        audit(written.path)
    assert caught.value.exit_code == 4
    last = audit(written.path, raise_on_damage=False).iloc[-1]
    assert (last["check"], last["result"]) == ("files", "damaged")


def test_audit_catches_a_note_that_was_edited_with_its_check_sum(written):
    table = store.read_table(written.path, written.commits[1].files["entries"], schema.ENTRIES)
    reseal(written, 1, "entries", replaced(table, "note", 0, "flown twice"))
    with pytest.raises(LedgerError, match="commit 1 does not have the content that its digest was made of"):
        audit(written.path)


def test_audit_names_the_first_balance_that_does_not_follow(written):
    table = store.read_table(written.path, written.commits[0].files["balances"], schema.BALANCES)
    reseal(written, 0, "balances", replaced(table, "usable_kg", 3, 1.0))
    with pytest.raises(LedgerError, match=r"usable_kg of node P00003 is 1.0, the entries give 0\.29"):
        audit(written.path)


@pytest.mark.parametrize(
    ("name", "value", "text"),
    [
        ("mass_before_kg", 9.0, "mass_before_kg is not the mass that the node had"),
        ("propellant_kg", 0.1, "propellant_kg is not what the rocket equation gives"),
        ("mass_after_kg", 9.69, "mass_after_kg is not mass less propellant"),
        ("seq", 17, "seq does not follow"),
        ("cause", "load", "its cause is not one of this kind of commit"),
        ("class", "hub", "its class is not the node's"),
        ("dv_m_s", -1.0, "dv_m_s is not lawful"),
    ],
)
def test_audit_names_the_entry_and_what_is_wrong_with_it(written, name, value, text):
    table = store.read_table(written.path, written.commits[2].files["entries"], schema.ENTRIES)
    reseal(written, 2, "entries", replaced(table, name, 0, value))
    with pytest.raises(LedgerError, match=rf"entries.parquet: entry 7 \(node P00002\): {text}"):
        audit(written.path)
