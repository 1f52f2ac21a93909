"""Pictures of studies: kept as PNG and SVG, the same bytes each time, without a display, in our own palette."""

import re
import xml.etree.ElementTree as ET

import numpy as np
import pandas as pd
import pytest

from farhold.interfaces import canvas
from farhold.interfaces.figures import FIGURES, draw
from farhold.study.campaign import Findings

NAMES = {"drift": {"drift_fan", "baselines"}, "hold": {"who_pays", "against_continuous"}}


def drifted(bins=200):
    day = np.array([0.5, 1.0, 7.0, 30.0])
    rows = pd.DataFrame({"day": day, "p50": day, "p95": 2 * day, "p99": 2.5 * day, "max": 3 * day})
    edges = np.geomspace(1.0, 1000.0, bins + 1)
    counts = np.arange(bins)
    bars = pd.DataFrame({"from_km": edges[:-1], "to_km": edges[1:], "before": counts, "after": counts[::-1]})
    summary = {"formation": "wide", "nodes": 12, "samples": 3, "for_days": 30.0}
    return Findings(summary, {"displacement": rows, "baselines": bars})


def kept(nodes=50, p99=1.9):
    price = np.linspace(0.4, 2.0, nodes)
    table = pd.DataFrame({"dv_mean_m_s_yr": price, "continuous_m_s_yr": 0.98 * price})
    year = {"mean_m_s": float(price.mean()), "p99_m_s": p99}
    return Findings({"formation": "wide", "policy": "box", "dv_per_year": year}, {"nodes": table})


FOUND = {"drift": drifted, "hold": kept}


@pytest.fixture(scope="module")
def drawn(tmp_path_factory):
    """Draws both studies once, into a folder of each: (folder, files) by the name of the study."""
    home = tmp_path_factory.mktemp("pictures")
    for study in FIGURES:
        (home / study).mkdir()
    return {study: (home / study, draw(study, FOUND[study](), home / study)) for study in FIGURES}


@pytest.mark.parametrize("study", FIGURES)
def test_every_picture_is_kept_in_both_kinds(study, drawn):
    folder, written = drawn[study]
    expected = {f"{name}.{ending}" for name in NAMES[study] for ending in ("png", "svg")}
    assert {path.name for path in written} == expected == {path.name for path in folder.iterdir()}


@pytest.mark.parametrize("study", FIGURES)
def test_pictures_are_whole_files_of_their_kind(study, drawn):
    written = drawn[study][1]
    heads = {path.read_bytes()[:8] for path in written if path.suffix == ".png"}
    assert heads == {b"\x89PNG\r\n\x1a\n"}
    roots = {ET.fromstring(path.read_bytes()).tag for path in written if path.suffix == ".svg"}
    assert roots == {"{http://www.w3.org/2000/svg}svg"}


@pytest.mark.parametrize("study", FIGURES)
def test_equal_findings_give_equal_bytes_without_a_display(study, drawn, tmp_path, monkeypatch):
    monkeypatch.delenv("DISPLAY", raising=False)
    monkeypatch.setenv("MPLBACKEND", "tkagg")
    again = draw(study, FOUND[study](), tmp_path)
    assert [path.read_bytes() for path in again] == [path.read_bytes() for path in drawn[study][1]]


def test_axes_carry_their_units(tmp_path, monkeypatch):
    import matplotlib as mpl

    # texts stay texts
    monkeypatch.setitem(mpl.rcParams, "svg.fonttype", "none")
    texts = " ".join(
        path.read_text()
        for study in FIGURES
        for path in draw(study, FOUND[study](), tmp_path)
        if path.suffix == ".svg"
    )
    for label in ("distance from the slot [km]", "days after release", "baseline [km]", "[m/s per year]"):
        assert label in texts


@pytest.mark.parametrize(
    ("study", "findings"),
    [("drift", drifted(0)), ("drift", drifted(1)), ("hold", kept(1)), ("hold", kept(3, None))],
    ids=["no baseline", "one bin", "one node", "no quantile"],
)
def test_little_to_show_is_drawn_all_the_same(study, findings, tmp_path):
    assert draw(study, findings, tmp_path)


def test_palette_is_told_apart_in_grey():
    # relative luminance after WCAG 2: lines that share a picture differ
    def luminance(colour):
        parts = [int(colour[k : k + 2], 16) / 255.0 for k in (1, 3, 5)]
        linear = [p / 12.92 if p <= 0.03928 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    amber, teal, plum = (luminance(getattr(canvas, name)) for name in ("AMBER", "TEAL", "PLUM"))
    assert re.fullmatch(r"#[0-9a-f]{6}", canvas.INK)
    assert amber > 1.5 * teal > 1.5 * plum
