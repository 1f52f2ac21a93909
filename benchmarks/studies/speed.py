"""How long the two studies of a whole swarm of 100,000 nodes take, and how much memory.

    python benchmarks/studies/speed.py [--nodes 100000] [--drift-samples 4] [--hold-nodes 10000]

Drift is flown on the full lane, which is what the command does, for a few samples and for twice as many: the
difference is the price of a sample, carried to 1,000. Holding runs a part of the nodes and is carried to all.
Targets on two cores: drift of a year x 1,000 samples under an hour on the full lane, holding of a year weekly
x 20 samples under ten minutes, both under 3 GB.
"""

import argparse
import resource
import tempfile
import time
from pathlib import Path

import numpy as np

import farhold as fh

CASE = """
schema = 1
title = "a cloud of {nodes} at L5"
epoch = "2035-03-20T00:00:00"
[reference]
point = "L5"
[class.probe]
dry_mass = "9.4 kg"
propellant = "0.30 kg"
specific_impulse = "65 s"
thrust = "20 mN"
impulse_bit = "0.5 mN s"
solar_area = "0.09 m2"
solar_coefficient = 1.3
[[swarm]]
class = "probe"
count = {nodes}
prefix = "P"
[formation.cloud]
rule = "inertial"
[[formation.cloud.slots]]
file = "cloud.csv"
[errors]
navigation_position = "1 m"
navigation_velocity = "0.1 mm/s"
measurement_cadence = "1 d"
drop_outs = "0.5 %"
unmodelled_acceleration = "1e-10 m/s2"
execution_magnitude = "1 %"
execution_fixed = "0.02 mm/s"
execution_pointing = "1 deg"
area_spread = "3 %"
release_speed = "1 cm/s"
[rates]
missed_burns = "0.1 %"
failures_per_year = "1 %"
[safety]
separation = "1 m"
"""


def cloud(folder, nodes):
    """Write a case of `nodes` in a normal cloud of 300 km."""
    place = 300.0 * np.random.default_rng(1).standard_normal((nodes, 3))
    rows = "\n".join(f"s{k},probe,{x:.3f},{y:.3f},{z:.3f}" for k, (x, y, z) in enumerate(place))
    home = Path(folder) / str(nodes)
    home.mkdir()
    (home / "cloud.csv").write_text("slot,class,x_km,y_km,z_km\n" + rows + "\n")
    (home / "cloud.toml").write_text(CASE.format(nodes=nodes))
    return fh.load(home / "cloud.toml")


def timed(function, *args, **options):
    begin = time.perf_counter()
    found = function(*args, **options)
    return found, time.perf_counter() - begin


def peak_gb():
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6


def say(what, seconds, target_s):
    print(f"{what}: {seconds:,.0f} s ({seconds / 60.0:.1f} min), target {target_s / 60.0:.0f} min")


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--nodes", type=int, default=100_000)
    parser.add_argument("--drift-samples", type=int, default=4)
    parser.add_argument("--hold-nodes", type=int, default=10_000)
    parser.add_argument("--threads", type=int, default=2)
    chosen = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        part = cloud(folder, chosen.hold_nodes)
        options = {"for_days": 365.25, "threads": chosen.threads}
        fh.hold(part, "cloud", samples=1, for_days=28.0)
        _, seconds = timed(fh.hold, part, "cloud", samples=20, **options)
        print(f"hold of {chosen.hold_nodes:,} nodes x 1 year weekly x 20 samples: {seconds:.1f} s")
        share = chosen.nodes / chosen.hold_nodes
        say(f"  carried to {chosen.nodes:,} nodes", seconds * share, 600.0)
        print(f"  peak memory so far {peak_gb():.2f} GB, target 3 GB")
        case = cloud(folder, chosen.nodes)
        fh.drift(part, "cloud", samples=1, for_days=10.0)
        fewer, more = chosen.drift_samples, 2 * chosen.drift_samples
        first, few_s = timed(fh.drift, case, "cloud", samples=fewer, pair_samples=1, **options)
        _, more_s = timed(fh.drift, case, "cloud", samples=more, pair_samples=1, **options)
        each = (more_s - few_s) / (more - fewer)
        print(
            f"drift of {chosen.nodes:,} nodes x 1 year: {few_s:.1f} s of {fewer} samples, {more_s:.1f} s of {more}"
        )
        print(f"  {each:.2f} s a sample on the {first.summary['lane']} lane")
        say("  carried to 1,000 samples", few_s + (1000 - fewer) * each, 3600.0)
        print(f"  peak memory {peak_gb():.2f} GB, target 3 GB")


if __name__ == "__main__":
    main()
