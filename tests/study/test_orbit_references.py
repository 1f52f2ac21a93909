"""References of every kind through a case file and through Python."""

import json

import numpy as np
import pytest

import farhold as fh
from farhold.study.case import load
from farhold.study.setting import reference_of
from farhold.units import say_length

L4 = 'point = "L4"'
SWAP = {
    "halo": 'point = "L2"\nkind = "halo"\nfamily = "north"\naz = "200000 km"',
    "halo-by-period": 'point = "L1"\nkind = "halo"\nfamily = "south"\nperiod = "177.5 d"\nphase = "90 deg"',
    "lyapunov": 'point = "L1"\nkind = "lyapunov"\nay = "300000 km"',
    "lissajous": 'point = "L2"\nkind = "lissajous"\nay = "250000 km"\naz = "100000 km"\nspan = "500 d"',
    "short-period": 'point = "L4"\nkind = "short-period"\namplitude = "1e6 km"',
    "long-period": 'point = "L4"\nkind = "long-period"\namplitude = "1000 km"',
}
NATURAL = """[formation.free]
rule = "natural"
[[formation.free.slots]]
class = "hub"
shape = "ring"
radius = "100 km"
count = 3
[[formation.free.slots]]
class = "probe"
shape = "ring"
radius = "500 km"
count = 9
"""


def text_of(kind):
    return {L4: SWAP[kind], NATURAL: ""}


@pytest.mark.parametrize("kind", SWAP)
def test_case_of_every_kind_is_checked(make_case, kind):
    result = fh.check(make_case(text_of(kind)))
    reference = result.summary["reference"]
    assert reference["kind"] == kind.removesuffix("-by-period")
    assert (reference["period_days"] is None) == (kind == "lissajous")
    assert (reference["stability_index"] is None) == (kind == "lissajous")
    assert all(row["holding_mean_m_s_yr"] > 0.0 for row in result.summary["formations"])
    json.dumps(result.summary)


def test_check_says_period_growth_and_index_of_the_halo(make_case):
    result = fh.check(make_case(text_of("halo")))
    reference = result.summary["reference"]
    # the multiplier l over the period T: index (l + 1/l) / 2, e-folding T / ln l
    multiplier = np.exp(reference["period_days"] / reference["unstable_efold_days"])
    assert reference["stability_index"] == pytest.approx(0.5 * (multiplier + 1.0 / multiplier), rel=1e-9)
    # halos near L2 take 180 d; O4, three times as high, 179.065 d with an index of 498 that grows inwards
    assert 179.065 < reference["period_days"] < 181.0
    assert 498.0 < reference["stability_index"] < 1000.0
    line = next(line for line in result.lines if line.startswith("Reference: halo about L2"))
    assert f"{say_length(2e8)} along N from the point" in line
    assert (
        f"; period {reference['period_days']:.6g} d, stability index {reference['stability_index']:.5g};" in line
    )
    assert f"; deviations grow e-fold in {reference['unstable_efold_days']:.1f} d." in line


def test_check_says_that_an_orbit_about_l4_is_stable(make_case):
    result = fh.check(make_case(text_of("short-period")))
    assert result.summary["reference"]["unstable_efold_days"] is None
    assert result.summary["reference"]["stability_index"] == pytest.approx(1.0, abs=1e-9)
    assert any("period 365.26 d, stable" in line for line in result.lines)


def test_check_says_how_long_a_lissajous_orbit_is_known(make_case):
    lines = fh.check(make_case(text_of("lissajous"))).lines
    assert any("it is known for 500 d from the case's epoch" in line for line in lines)


def test_check_warns_of_a_timeline_longer_than_the_lissajous_orbit_is_known(make_case):
    hold = '[[timeline]]\nphase = "hold"\nfor = "{} d"\n'
    warned = fh.check(make_case(text_of("lissajous"), more=hold.format(501))).summary["warnings"]
    quiet = fh.check(make_case(text_of("lissajous"), more=hold.format(500))).summary["warnings"]
    text = "The timeline runs for 501 d, and the reference is known for 500 d only: give it a longer span."
    assert [text in warned, text in quiet] == [True, False]


@pytest.mark.parametrize(("reference", "dim"), [("halo", False), ("point", True)])
def test_check_speaks_of_the_shadow_where_the_reference_meets_it(make_case, reference, dim):
    swaps = text_of("halo") if reference == "halo" else {L4: 'point = "L2"', NATURAL: ""}
    warnings = fh.check(make_case(swaps)).summary["warnings"]
    assert any("the shadow dims the Sun there" in text for text in warnings) == dim


def test_options_of_the_case_reach_the_reference(make_case):
    case = make_case(text_of("halo-by-period"))
    assert case.reference.options == pytest.approx(
        {"family": "south", "period_s": 177.5 * 86400.0, "phase_rad": np.pi / 2.0}
    )
    assert reference_of(case).period_s == pytest.approx(177.5 * 86400.0, rel=1e-14)


def test_orbit_that_does_not_exist_is_said_when_the_case_is_checked(make_case):
    case = make_case({**text_of("halo"), L4: SWAP["halo"].replace("200000 km", "3e6 km")})
    with pytest.raises(fh.FarholdError, match="no halo at L2 reaches") as caught:
        fh.check(case)
    assert caught.value.exit_code == 5


def test_natural_slots_about_an_orbit_are_refused(write_case):
    with pytest.raises(
        ValueError, match="rule 'natural' about a reference of kind 'short-period' is not available"
    ):
        load(write_case({L4: SWAP["short-period"]}))


def test_halo_of_a_case_at_l3_is_refused(write_case):
    with pytest.raises(ValueError, match=r"got 'halo' at L3 \(allowed: halo at L1 L2\)"):
        load(write_case({**text_of("halo"), L4: SWAP["halo"].replace("L2", "L3")}))


@pytest.mark.parametrize(
    ("point", "kind", "options", "least_days", "most_days"),
    [
        ("L2", "halo", {"family": "north", "period_days": 179.5}, 179.5 - 1e-9, 179.5 + 1e-9),
        # O4 at 683,000 km: 179.065 d
        ("L2", "halo", {"family": "north", "az_km": 2e5, "phase_deg": 30.0}, 179.065, 181.0),
        # between the linear mode, 175.0 d (P12), and O6 at 770,000 km, 179.3 d
        ("L1", "lyapunov", {"ay_km": 3e5}, 175.0, 179.3),
        # P11: 1.00001026 sidereal years
        ("L5", "short-period", {"amplitude_km": 1e5}, 365.260, 365.261),
    ],
)
def test_reference_of_every_kind_is_made_from_python(point, kind, options, least_days, most_days):
    motion = fh.reference(point, kind=kind, **options).motion
    assert (motion.point, motion.kind) == (point, kind)
    assert least_days < motion.period_s / 86400.0 < most_days


def test_span_from_python_is_that_of_the_lissajous_orbit():
    motion = fh.reference("L2", kind="lissajous", ay_km=2e5, az_km=1e5, span_days=100.0).motion
    assert motion.span_s == (0.0, 100.0 * 86400.0)


def test_transition_from_python_is_that_of_the_orbit():
    ref = fh.reference("L2", kind="halo", family="north", az_km=2e5)
    np.testing.assert_array_equal(ref.transition(1.0, 30.0), ref.motion.transition(86400.0, 30.0 * 86400.0))


@pytest.mark.parametrize(
    ("options", "text"),
    [
        (
            {"ay_km": 1.0},
            "reference: the kind 'halo' takes no ay_km (allowed: family az_km period_days phase_deg)",
        ),
        ({"az_km": 1.0}, "reference: the kind 'halo' needs family (allowed: family az_km period_days phase_deg)"),
        ({"family": "north", "az_km": "far"}, "reference.az_km: got 'far' (allowed: a number)"),
    ],
)
def test_options_from_python_are_refused_by_their_names(options, text):
    with pytest.raises(ValueError) as caught:
        fh.reference("L2", kind="halo", **options)
    assert str(caught.value) == text
