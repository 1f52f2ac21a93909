"""How often the intervals of a holding study hold the truth: hundreds of small studies against a very large one.

    python benchmarks/studies/intervals.py [--studies 400] [--samples 8]

Four nodes of a quiet formation, seven weeks, all errors drawn. The truth is the same study with a hundred times
as many samples. An interval said to hold 95 % should hold the mean in 95 % of the studies, to the spread of the
count of studies itself, and the 99 % quantile in 95 % or more: draws of unlike nodes are a layered sample, for
which order statistics are wider than need be.
"""

import argparse
import math
import tempfile
from pathlib import Path

import farhold as fh

CASE = """
schema = 1
title = "four nodes at L4"
epoch = "2035-03-20T00:00:00"
[reference]
point = "L4"
[class.probe]
dry_mass = "9.4 kg"
propellant = "0.30 kg"
specific_impulse = "65 s"
thrust = "20 mN"
solar_area = "0.09 m2"
solar_coefficient = 1.3
[[swarm]]
class = "probe"
count = 4
prefix = "P"
[formation.near]
rule = "rotating"
[[formation.near.slots]]
class = "probe"
shape = "ring"
radius = "20 km"
count = 4
[errors]
navigation_position = "1 m"
navigation_velocity = "0.5 mm/s"
execution_magnitude = "1 %"
execution_pointing = "1 deg"
area_spread = "3 %"
[holding]
policy = "revisit"
"""


def held(case, samples, seed):
    return fh.hold(case, "near", for_days=49.0, samples=samples, seed=seed).summary


def report(what, hits, studies):
    share = hits / studies
    slack = 3.0 * math.sqrt(0.95 * 0.05 / studies)
    print(
        f"{what}: {100.0 * share:.1f} % of {studies} studies (95 % asked, +- {100.0 * slack:.1f} % at three sigma)"
    )
    return share, slack


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--studies", type=int, default=400)
    parser.add_argument("--samples", type=int, default=8)
    chosen = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "four.toml"
        path.write_text(CASE)
        case = fh.load(path)
        truth = held(case, max(5000, 100 * chosen.samples), 10**6)["dv_per_year"]
        mean = quantile = bounded = 0
        for seed in range(chosen.studies):
            found = held(case, chosen.samples, seed)["interval_95"]
            mean += found["mean_m_s"][0] <= truth["mean_m_s"] <= found["mean_m_s"][1]
            low, high = found["p99_m_s"]
            bounded += high is not None
            quantile += (low is None or low <= truth["p99_m_s"]) and (high is None or truth["p99_m_s"] <= high)
    share, slack = report("mean within its interval", mean, chosen.studies)
    wide, _ = report("99 % quantile within its interval", quantile, chosen.studies)
    print(f"99 % quantile bounded above in {bounded} studies: {4 * chosen.samples} draws are few for it")
    if abs(share - 0.95) > slack or wide < 0.95 - slack:
        raise SystemExit("an interval does not hold what it says")


if __name__ == "__main__":
    main()
