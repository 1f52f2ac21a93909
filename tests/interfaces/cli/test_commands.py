"""The commands, called as a user calls them, over stand-ins of the study floor."""

import json

import pytest
from click.testing import CliRunner

from farhold.errors import Fault, LedgerError, NoSolutionError, UnaffordableError
from farhold.interfaces.cli import COMMANDS, cli
from farhold.interfaces.cli.text import CAUTION
from farhold.planning.assignment.objectives import OBJECTIVES

QUOTE = ["quote", "marram.toml", "--to", "wide", "--over", "30 d"]
EVERY = {
    "start": ["start", "new"],
    "check": ["check", "marram.toml"],
    "quote": QUOTE,
    "post": ["post", "q", "--ledger", "L"],
    "create": ["ledger", "create", "L", "marram.toml"],
    "balances": ["ledger", "balances", "L"],
    "statement": ["ledger", "statement", "L", "P0001"],
    "audit": ["ledger", "audit", "L"],
    "correct": ["ledger", "correct", "L", "4", "--why", "typed twice"],
}


@pytest.fixture
def run(study):
    def call(*words, columns=80):
        return CliRunner(env={"COLUMNS": str(columns)}).invoke(cli, list(words))

    return call


@pytest.mark.parametrize("words", EVERY.values(), ids=EVERY)
def test_command_json_is_one_document_and_nothing_else(run, words):
    done = run(*words, "--json")
    document = json.loads(done.stdout)
    assert done.exit_code == 0
    assert done.stderr == ""
    assert document["schema"] == 1
    assert document["kind"] == words[1] if words[0] == "ledger" else words[0]


@pytest.mark.parametrize("columns", [80, 120])
@pytest.mark.parametrize("words", EVERY.values(), ids=EVERY)
def test_command_text_fits_the_width_and_loses_nothing(run, words, columns):
    done = run(*words, columns=columns)
    assert done.exit_code == 0
    assert max(len(line) for line in done.stdout.splitlines()) <= columns
    assert "…" not in done.stdout


@pytest.mark.parametrize("words", [QUOTE, EVERY["check"], EVERY["post"], EVERY["balances"]], ids=lambda w: w[-2])
def test_report_carries_the_caution(run, words):
    assert CAUTION in " ".join(run(*words).stdout.split())


def test_quote_folds_the_longest_lawful_names_whole(run, study):
    nodes = study.priced.nodes
    for column in ("node", "class", "slot"):
        nodes[column] = [f"{column}-{place}".ljust(32, "x") for place in range(3)]
    done = run(*QUOTE)
    assert max(len(line) for line in done.stdout.splitlines()) <= 80
    assert done.stdout.count("x") >= sum(
        nodes[column].str.count("x").sum() for column in ("node", "class", "slot")
    )


def test_quote_hands_every_option_to_the_study(run, study):
    done = run(
        *QUOTE,
        "--from",
        "huddle",
        "--depart",
        "2035-04-01",
        "--objective",
        "least-worst",
        "--horizon",
        "120 d",
        "--ledger",
        "L",
        "--accuracy",
        "fine",
        "--threads",
        "2",
        "--quiet",
    )
    watch = study.quote.pop("watch")
    assert done.exit_code == 0
    assert watch.note("silent") is None
    assert study.quote == {
        "case": "case of marram.toml",
        "to": "wide",
        "from_": "huddle",
        "depart": "2035-04-01",
        "over_days": 30.0,
        "objective": "least-worst",
        "horizon_days": 120.0,
        "ledger": "L",
        "accuracy": "fine",
        "threads": 2,
    }


def test_quote_says_the_price_and_the_worst_off_first(run):
    lines = run(*QUOTE).stdout.splitlines()
    assert lines[0] == "huddle to wide: 1.800 m/s in all"
    assert any(line.split() == ["worst", "off", "P0002", "pays", "1.190", "m/s"] for line in lines)


def test_quote_writes_out_imported_control_and_markup(run):
    line = run(*QUOTE).stdout.splitlines()[1]
    assert line == r"Marram: [red]solar[/red]\x1b[31m wind"


def test_quote_not_affordable_is_saved_named_and_exits_3(run, study, make_quote, tmp_path):
    study.priced = make_quote(affordable=False)
    out = str(tmp_path / "q")
    done = run(*QUOTE, "-o", out)
    assert done.exit_code == 3
    assert study.priced.saved == [(out, False)]
    assert "NO: 1 of 3 nodes cannot pay: P0002" in done.stdout


def test_quote_not_affordable_json_is_still_the_quote(run, study, make_quote):
    study.priced = make_quote(affordable=False)
    done = run(*QUOTE, "--json")
    assert done.exit_code == 3
    assert json.loads(done.stdout)["cannot_afford"] == ["P0002"]


def test_quote_refuses_an_existing_output_before_it_computes(run, study, tmp_path):
    (tmp_path / "kept").write_text("mine")
    done = run(*QUOTE, "-o", str(tmp_path))
    assert done.exit_code == 2
    assert done.stderr == f"{tmp_path}: exists already (--force replaces it, or choose another name)\n"
    assert study.quote is None
    assert study.priced.saved == []


def test_json_numbers_that_are_not_finite_are_null(run):
    assert json.loads(run(*QUOTE, "--json").stdout)["seconds"] == {"total": None}


def test_check_says_warnings_as_plain_text(run):
    done = run("check", "marram.toml")
    assert "16 hubs and 960 probes stand at L5." in done.stdout
    assert "box smaller than [b]swing[/b]" in done.stdout


def test_post_hands_the_quote_to_the_ledger(run, study):
    assert run("post", "q", "--ledger", "L", "--requote").exit_code == 0
    assert study.posted == ("quote in q", True)


def test_correct_hands_seq_and_reason_to_the_ledger(run, study):
    run(*EVERY["correct"])
    assert study.ledger.corrected == [(4, "typed twice")]


def test_statement_json_has_the_ledger_columns_and_iso_epochs(run, ledger):
    row = json.loads(run("ledger", "statement", "L", "P0001", "--json").stdout)["rows"][1]
    assert list(row) == list(ledger.frame.columns)
    assert row["epoch_tdb"] == "2035-04-19T00:00:00"


def test_balances_of_many_nodes_show_ten_and_say_where_the_rest_is(run, study):
    import pandas as pd

    many = pd.concat([study.ledger.balances()] * 20, ignore_index=True)
    study.ledger.balances = lambda: many
    done = run("ledger", "balances", "L")
    assert sum(line.startswith(("P0", "H0")) for line in done.stdout.splitlines()) == 10
    assert "All 60: --json, or farhold ledger export L -o balances.xlsx" in done.stdout


def test_export_writes_the_chosen_nodes(run, tmp_path):
    path = tmp_path / "book.csv"
    done = run("ledger", "export", "L", "-o", str(path), "--nodes", "H01, P0002", "--json")
    assert json.loads(done.stdout)["file"] == str(path)
    assert {line.split(",")[1] for line in path.read_text().splitlines()[1:]} == {'"H01"', '"P0002"'}


BAD = {
    "command": (
        ["qoute"],
        "farhold: no command 'qoute' (allowed: start, check, quote, drift, hold, status, post, ledger; "
        "did you mean 'quote'?)",
    ),
    "verb": (
        ["ledger", "balance", "L"],
        "farhold ledger: no command 'balance' (allowed: create, balances, statement, audit, correct, export; "
        "did you mean 'balances'?)",
    ),
    "option": (
        [*QUOTE, "--objectiv", "x"],
        "farhold quote: no option '--objectiv' (did you mean '--objective'?)",
    ),
    "far option": ([*QUOTE, "--zzz"], "farhold quote: no option '--zzz' (see farhold quote --help)"),
    "missing option": (
        ["quote", "marram.toml", "--over", "30 d"],
        "farhold quote: --to is missing (--to: The formation to go to.)",
    ),
    "missing word": (["check"], "farhold check: CASE is missing (see farhold check --help)"),
    "extra word": (
        ["check", "a", "b"],
        "farhold check: unexpected extra argument (b) (see farhold check --help)",
    ),
    "no value": (
        ["quote", "marram.toml", "--to"],
        "farhold quote: --to needs a value (see farhold quote --help)",
    ),
    "choice": (
        [*QUOTE, "--objective", "least-wurst"],
        f"--objective: got 'least-wurst' (allowed: {', '.join(OBJECTIVES)}; did you mean 'least-worst'?)",
    ),
    "accuracy": (
        [*QUOTE, "--accuracy", "best"],
        "--accuracy: got 'best' (allowed: draft, default, fine)",
    ),
    "threads": ([*QUOTE, "--threads", "0"], "--threads: got '0' (allowed: a whole number, 1 or above)"),
    "threads text": (
        [*QUOTE, "--threads", "two"],
        "--threads: got 'two' (allowed: a whole number, 1 or above)",
    ),
    "seq": (
        ["ledger", "correct", "L", "x", "--why", "w"],
        "SEQ: got 'x' (allowed: a whole number, 0 or above)",
    ),
    "zero time": (
        ["quote", "marram.toml", "--to", "wide", "--over", "0 d"],
        "--over: got '0 d' (allowed: a time above zero, such as \"30 d\")",
    ),
    "ending": (
        ["ledger", "export", "L", "-o", "book.xls"],
        "book.xls: the ending '.xls' is unknown (allowed: .xlsx, .csv, .parquet; did you mean book.xlsx?)",
    ),
}


@pytest.mark.parametrize(("words", "sentence"), BAD.values(), ids=BAD)
def test_bad_words_get_one_sentence_and_exit_2(run, study, words, sentence):
    done = run(*words)
    assert (done.exit_code, done.stdout, done.stderr) == (2, "", sentence + "\n")
    assert study.quote is None


# a last option without its value would take --json for it
BAD_JSON = {name: case for name, case in BAD.items() if name != "no value"}


@pytest.mark.parametrize(("words", "sentence"), BAD_JSON.values(), ids=BAD_JSON)
def test_bad_words_with_json_give_the_fault_document(run, words, sentence):
    done = run(*words, "--json")
    document = json.loads(done.stdout)
    assert done.stderr == ""
    assert (document["kind"], document["exit"], done.exit_code) == ("fault", 2, 2)
    assert [list(fault) for fault in document["faults"]] == [["where", "what", "allowed", "hint"]]
    assert Fault(**document["faults"][0]).sentence() == sentence


@pytest.mark.parametrize("over", ["30", "30 kg", "soon", "nan d"])
def test_time_without_its_unit_is_refused_at_the_option(run, study, over):
    done = run("quote", "marram.toml", "--to", "wide", "--over", over)
    assert done.exit_code == 2
    assert done.stderr.startswith("--over: ")
    assert done.stderr.count("\n") == 1
    assert study.quote is None


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (LedgerError(Fault("L", "the head is damaged")), 4),
        (NoSolutionError([Fault("P0001", "singular"), Fault("P0002", "singular")]), 5),
        (UnaffordableError(Fault("q", "3 nodes cannot pay")), 3),
        (KeyboardInterrupt(), 130),
        (ZeroDivisionError("by zero"), 1),
    ],
    ids=["ledger", "no solution", "unaffordable", "interrupted", "unexpected"],
)
@pytest.mark.parametrize("how", [[], ["--json"]], ids=["text", "json"])
def test_failure_gives_its_exit_code(run, study, monkeypatch, error, code, how):
    def fail(quote, requote=False):
        raise error

    study.ledger.post = fail
    done = run("post", "q", "--ledger", "L", *how)
    assert done.exit_code == code
    if how:
        assert json.loads(done.stdout)["exit"] == code
    else:
        assert done.stdout == ""
        assert "Traceback" not in done.stderr


def test_unexpected_failure_shows_its_traceback_only_when_asked(run, study):
    study.ledger.post = lambda quote, requote: 1 / 0
    quiet, loud = run("post", "q", "--ledger", "L"), run("post", "q", "--ledger", "L", "--verbose")
    sentence = "farhold: unexpected ZeroDivisionError: division by zero (--verbose shows the traceback)\n"
    assert quiet.stderr == sentence
    assert "Traceback" in loud.stderr
    assert loud.stderr.endswith(sentence)


def test_several_faults_are_one_line_each_and_counted(run, study):
    def fail(quote, requote):
        raise NoSolutionError([Fault("P0001", "singular at 182 d"), Fault("P0002", "singular at 182 d")])

    study.ledger.post = fail
    assert run("post", "q", "--ledger", "L").stderr.splitlines() == [
        "P0001: singular at 182 d",
        "P0002: singular at 182 d",
        "2 faults; nothing was written.",
    ]


@pytest.mark.parametrize("how", [[], ["--json"]], ids=["text", "json"])
def test_fault_of_very_many_nodes_is_cut_in_text_and_whole_in_json(run, study, how):
    names = [f"P{place:04d}" for place in range(1, 41)]

    def fail(quote, requote):
        raise NoSolutionError(Fault("--over", f"singular for 40 nodes: {', '.join(names)}", "1 d to 145 d"))

    study.ledger.post = fail
    done = run("post", "q", "--ledger", "L", *how)
    if how:
        assert all(name in json.loads(done.stdout)["faults"][0]["what"] for name in names)
    else:
        shown = f"{', '.join(names[:12])}, and 28 more (--json names all)"
        assert done.stderr == (f"--over: singular for 40 nodes: {shown} (allowed: 1 d to 145 d)\n")


@pytest.mark.parametrize("name", COMMANDS)
def test_table_names_a_command_of_that_name_with_one_line_of_help(name):
    command = cli.get_command(None, name)
    assert command.name == name
    assert COMMANDS[name][1].endswith(".")
