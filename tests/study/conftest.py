"""A small swarm at L4: three hubs and nine probes, and formations under every rule."""

import pytest

from farhold.study.case import load

CASE = """
schema = 1
title = "Tern: a trial at L4"
epoch = "2035-03-20T00:00:00"
[reference]
point = "L4"
[class.probe]
dry_mass = "9.4 kg"
propellant = "0.30 kg"
specific_impulse = "65 s"
thrust = "20 mN"
thrust_efficiency = 0.9
impulse_bit = "0.5 mN s"
solar_area = "0.09 m2"
solar_coefficient = 1.3
attitude_per_year = "0.05 m/s"
leak_per_year = "1 g"
attitude_thruster = { specific_impulse = "40 s" }
[class.hub]
dry_mass = "46 kg"
propellant = "2.0 kg"
specific_impulse = "210 s"
thrust = "0.5 N"
solar_area = "0.5 m2"
solar_coefficient = 1.25
attitude_per_year = "0.2 m/s"
capacity = 8
link_range = "500 km"
[[swarm]]
class = "hub"
count = 3
prefix = "H"
[[swarm]]
class = "probe"
count = 9
prefix = "P"
[formation.nearby]
rule = "inertial"
[[formation.nearby.slots]]
class = "hub"
shape = "ring"
radius = "60 km"
count = 3
[[formation.nearby.slots]]
class = "probe"
shape = "ball"
radius = "150 km"
count = 9
spacing = "5 km"
seed = 3
[formation.far]
rule = "inertial"
start = "2035-04-20T00:00:00"
[[formation.far.slots]]
class = "hub"
shape = "ring"
radius = "300 km"
count = 3
[[formation.far.slots]]
class = "probe"
shape = "shell"
radius = "700 km"
count = 9
[formation.still]
rule = "rotating"
[[formation.still.slots]]
class = "hub"
shape = "line"
axis = "T"
length = "300 km"
count = 3
[[formation.still.slots]]
class = "probe"
shape = "disk"
radius = "400 km"
count = 9
[formation.free]
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
[formation.six]
rule = "inertial"
[[formation.six.slots]]
class = "probe"
shape = "ring"
radius = "350 km"
count = 6
[margins]
manoeuvre = { share = "5 %", why = "computed manoeuvres" }
attitude = { share = "100 %", why = "not yet modelled" }
residual = { share = "2 %", why = "cannot be drawn" }
contingency = { dv = "0.2 m/s", why = "safe mode" }
"""


@pytest.fixture
def write_case(tmp_path):
    """Writes the case with some of its text replaced: write_case({old: new}, more="", name="tern.toml")."""

    def write(swaps=None, more="", name="tern.toml", folder=None):
        text = CASE
        for old, new in (swaps or {}).items():
            assert old in text, old
            text = text.replace(old, new)
        path = (folder or tmp_path) / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text + more)
        return path

    return write


@pytest.fixture
def make_case(write_case):
    """Loads the case with some of its text replaced; arguments as write_case."""
    return lambda *args, **options: load(write_case(*args, **options))


@pytest.fixture(scope="session")
def tern(tmp_path_factory):
    """The case as it stands."""
    path = tmp_path_factory.mktemp("tern") / "tern.toml"
    path.write_text(CASE)
    return load(path)
