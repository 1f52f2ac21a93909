"""Progress: nothing before the delay, plain lines after it, seconds when asked."""

import io
import time

import pytest

from farhold.interfaces.cli.options import Manner
from farhold.interfaces.cli.progress import BarWatch, LineWatch, duration, watching
from farhold.watch import SILENT, Watch


class Terminal(io.StringIO):
    def isatty(self):
        return True


@pytest.fixture
def make(monkeypatch):
    monkeypatch.setenv("TERM", "xterm")
    made = []

    def build(kind, **options):
        stream = Terminal() if kind is BarWatch else io.StringIO()
        watch = kind(stream, **options)
        made.append(watch)
        return watch, stream

    yield build
    for watch in made:
        watch.close()


def test_short_work_says_nothing(make):
    watch, stream = make(LineWatch)
    watch.stage("pairing", 976)
    watch.advance(976)
    watch.close()
    assert stream.getvalue() == ""


def test_long_work_says_the_stage_after_the_delay(make):
    watch, stream = make(LineWatch, delay_s=0.01)
    watch.stage("pairing", 976)
    time.sleep(0.1)
    watch.stage("flying")
    assert stream.getvalue() == "pairing (976)\nflying\n"


def test_note_is_said_at_once(make):
    watch, stream = make(LineWatch)
    watch.note("compiling \x1b[31mkernels")
    assert stream.getvalue() == "compiling \\x1b[31mkernels\n"


def test_verbose_says_every_stage_with_its_seconds(make):
    watch, stream = make(LineWatch, verbose=True)
    watch.stage("pairing")
    watch.close()
    assert stream.getvalue().startswith("pairing: 0.")
    assert stream.getvalue().endswith(" s\n")


def test_bar_is_drawn_with_the_stage_and_taken_away(make):
    watch, stream = make(BarWatch, delay_s=60.0)
    watch.stage("[red]pairing[/red]", 10)
    watch.show()
    watch.advance(4)
    watch.close()
    assert "[red]pairing[/red]" in stream.getvalue()


def test_quiet_is_silent():
    with watching(Manner(quiet=True)) as watch:
        assert watch is SILENT


def test_watches_keep_the_protocol(make):
    assert isinstance(make(LineWatch)[0], Watch)


@pytest.mark.parametrize(
    ("seconds", "said"),
    [
        (0.4, "0 s"),
        (45.2, "45 s"),
        (89.9, "90 s"),
        (720.0, "12 min"),
        (11100.0, "3 h 05 min"),
        (3.6e6, "1,000 h 00 min"),
    ],
)
def test_duration_reads_as_a_time_to_wait_for(seconds, said):
    assert duration(seconds) == said


@pytest.fixture
def clock(monkeypatch):
    """A clock that stands until it is set: clock.now."""

    class Clock:
        now = 1000.0

    monkeypatch.setattr("farhold.interfaces.cli.progress.time.monotonic", lambda: Clock.now)
    return Clock


def test_lines_say_count_rate_and_time_left(make, clock):
    watch, stream = make(LineWatch, delay_s=60.0)
    watch.stage("chunks of drift", 40)
    watch.show()
    clock.now += 20.0
    watch.advance(10)
    clock.now += 1.0
    watch.advance(1)
    assert stream.getvalue() == "chunks of drift (40)\nchunks of drift: 10 of 40, 2.0 s each, 60 s left\n"


def test_fast_stage_says_its_rate(make, clock):
    watch, stream = make(LineWatch, delay_s=60.0)
    watch.stage("flying", 4000)
    watch.show()
    clock.now += 10.0
    watch.advance(1000)
    assert stream.getvalue().endswith("flying: 1,000 of 4,000, 100.0 per s, 30 s left\n")


def test_lines_become_rare_in_a_long_night(make, clock):
    watch, stream = make(LineWatch, delay_s=60.0)
    watch.stage("chunks of drift", 2880)
    watch.show()
    for _ in range(2880):
        clock.now += 10.0
        watch.advance()
    assert 80 < len(stream.getvalue().splitlines()) < 140


def test_stage_of_unknown_length_says_no_time_left(make, clock):
    watch, stream = make(LineWatch, delay_s=60.0)
    watch.stage("reading")
    watch.show()
    clock.now += 10.0
    watch.advance(5)
    assert stream.getvalue() == "reading\nreading: 5, 2.0 s each\n"


def test_bar_shows_count_and_time_left(make, clock):
    watch, stream = make(BarWatch, delay_s=60.0)
    watch.stage("chunks of drift", 40)
    watch.show()
    clock.now += 20.0
    watch.advance(10)
    watch.close()
    assert "10 of 40, 2.0 s each, 60 s left" in stream.getvalue()
