"""Every registered network against what its own roles say: nodal analysis, Kirchhoff's laws, power, signs.

Nothing here knows a network by name: a new network file is tested by being there. The method is common practice (nodal
analysis, superposition, finite differences); the values are invented.
"""

import itertools
import sys
from pathlib import Path

import nodal
import numpy as np
import pytest
from numpy.testing import assert_allclose
from numpy.typing import NDArray

from synth.networks import NETWORKS, Network, QPoint, register_package
from synth.q_point import SATURATED, solve, solve_active
from synth.quantities import Spread
from synth.transistor import Transistor

Array = NDArray[np.float64]

VARIANTS = [
    pytest.param(name, rails, roles, id=f"{name}-{'+'.join(rails)}-{'+'.join(roles)}")
    for name, network in NETWORKS.items()
    for rails, roles in nodal.variants(network)
]
variants = pytest.mark.parametrize(("name", "rails", "roles"), VARIANTS)
every = pytest.mark.parametrize("network", NETWORKS.values(), ids=NETWORKS)

DEVICE = ("delta", "hfe", "icbo")


def device(model: str) -> Transistor:
    return Transistor(hfe=Spread.exact(100.0), vbe=Spread.exact(0.65), vbe_ic=2e-3, vbe_model=model)  # type: ignore[arg-type]


def log_uniform(rng: np.random.Generator, low: float, high: float, n: int) -> Array:
    return np.asarray(np.exp(rng.uniform(np.log(low), np.log(high), n)))


Point = dict[str, Array]
"""Every parameter of n stages: rails [V], roles [ohm], delta [V], hfe [-], icbo [A], temperature [K]."""


def draw(rails: tuple[str, ...], roles: tuple[str, ...], n: int, seed: int, low: float = 10.0, high: float = 1e7) -> Point:
    """Random stages over the default range of resistances."""
    rng = np.random.default_rng(seed)
    return {
        **{rail: rng.uniform(2.0, 40.0, n) for rail in rails if rail not in nodal.REFERENCE},
        **({"vref": rng.uniform(0.2, 12.0, n), "r_ref": log_uniform(rng, 1.0, 1e4, n)} if "vref" in rails else {}),
        **{role: log_uniform(rng, low, high, n) for role in roles},
        "delta": rng.uniform(-0.1, 0.1, n),
        "hfe": log_uniform(rng, 10.0, 1000.0, n),
        "icbo": np.where(rng.random(n) < 0.2, 0.0, log_uniform(rng, 1e-12, 1e-5, n)),
        "temperature": rng.uniform(218.15, 423.15, n),
    }


def parts(point: Point, rails: tuple[str, ...], roles: tuple[str, ...]) -> tuple[Point, Point]:
    return {rail: point[rail] for rail in rails}, {role: point[role] for role in roles}


def sum_of_sources(volts: Point) -> Array:
    """Sum of every voltage that drives a network."""
    return np.asarray(sum(v for name, v in volts.items() if name != "r_ref"))


def q_point(
    law: object, network: Network, q: Transistor, point: Point, rails: tuple[str, ...], roles: tuple[str, ...]
) -> QPoint:
    volts, r = parts(point, rails, roles)
    rest = {name: point[name] for name in (*DEVICE, "temperature")}
    return law(network, q, volts, r, **rest)  # type: ignore[no-any-return, operator]


# ---------------------------------------------------------------------------------------------- the form


@every
def test_description_is_complete(network: Network) -> None:
    assert network.rails[0] == "vcc"
    assert network.title
    assert network.summary.endswith(".")
    names = {*network.role_names, *network.rails, *network.optional_rails}
    nodes = {"0", "b", "c", "e", *(["m"] if network.reference != "no" else []), *network.rails, *network.optional_rails}
    for role in network.roles:
        assert role.meaning
        assert network.role(role.name) is role
        assert set(role.nodes) <= nodes
    known = {"ic", "vce", "vc", "ve", *(f"i_{role}" for role in network.role_names)}
    assert set(network.signs) <= known | ({"i_ref"} if network.reference != "no" else set())
    for signs in network.signs.values():
        assert set(signs) <= names | set(DEVICE) | ({"delta_ref"} if network.reference != "no" else set())
        assert set(signs.values()) <= {-1, 0, 1, None}
    assert set(network.draws) == {*network.rails, *network.optional_rails}
    assert {*network.base_side, *([network.bleeder] if network.bleeder else [])} <= set(network.role_names)


@every
def test_names_are_those_of_the_files(network: Network) -> None:
    # The key is the network's own name; each file is named after its network; files come in alphabetical order.
    assert NETWORKS[network.name] is network
    files = sorted(p.stem for p in Path(sys.modules["synth.networks"].__path__[0]).glob("*.py"))
    assert network.name in files
    assert list(NETWORKS) == [name for name in files if name in NETWORKS]


@every
def test_unnamed_sign_is_unknown(network: Network) -> None:
    assert network.sign("ic", "no such parameter") is None
    assert network.sign("no such quantity", "vcc") is None


# ---------------------------------------------------------------------------------------------- two-port


@variants
def test_two_port_is_what_open_circuit_measurements_give(name: str, rails: tuple[str, ...], roles: tuple[str, ...]) -> None:
    network, n = NETWORKS[name], 300
    point = draw(rails, roles, n, seed=31)
    volts, r = parts(point, rails, roles)
    port = network.two_port(volts, r, point["temperature"])
    # Transistor removed: the open-circuit voltages. Rails at 0 V and 1 mA through one port: the resistances.
    e_b, e_c = nodal.Circuit(network, volts, r).open(0.0, 0.0)
    quiet = nodal.Circuit(network, {rail: v if rail == "r_ref" else 0.0 * v for rail, v in volts.items()}, r)
    base, collector = quiet.open(1e-3, 0.0), quiet.open(0.0, 1e-3)
    measured = (e_b, -base[0] / 1e-3, -collector[0] / 1e-3, e_c, -base[1] / 1e-3, -collector[1] / 1e-3)
    # Port voltages are differences of node voltages: their error scales with the largest resistance and rail.
    volt_scale, ohm_scale = sum_of_sources(volts), np.abs(measured[1]) + np.abs(measured[5])
    for field, value, scale in zip(port._fields, measured, (volt_scale, *[ohm_scale] * 2) * 2, strict=True):
        assert np.all(np.abs(getattr(port, field) - value) <= 1e-9 * scale), field


@variants
def test_two_port_carries_a_complex_step(name: str, rails: tuple[str, ...], roles: tuple[str, ...]) -> None:
    network, n, step = NETWORKS[name], 200, 1e-20
    point = draw(rails, roles, n, seed=32, low=1e2, high=1e6)
    volts, r = parts(point, rails, roles)
    plain = network.two_port(volts, r, point["temperature"])
    for moved in (*rails, *roles):
        # Real part unchanged; imaginary part is the derivative, against a central difference of 1e-4 of the parameter.
        complex_point = {k: v * (1.0 + step * 1j) if k == moved else v for k, v in point.items()}
        found = network.two_port(*parts(complex_point, rails, roles), point["temperature"])
        up, down = (
            network.two_port(*parts({**point, moved: point[moved] * s}, rails, roles), point["temperature"])
            for s in (1.0 + 1e-4, 1.0 - 1e-4)
        )
        for field, exact in zip(plain._fields, found, strict=True):
            real = np.broadcast_to(getattr(plain, field), (n,))
            scale = np.abs(real) + 1e-300
            assert_allclose(np.real(exact) + 0.0 * real, real, rtol=1e-14, atol=0)
            slope = (getattr(up, field) - getattr(down, field)) / 2e-4
            # Truncation (1e-4)**2 of the value at most, rounding 1e-16/1e-4.
            assert np.all(np.abs(np.imag(exact) / step - slope) <= 1e-7 * scale), (moved, field)


# ---------------------------------------------------------------------------------------------- branches


@pytest.mark.parametrize("model", ["junction", "fixed"])
@variants
def test_branches_obey_kirchhoff_at_every_node(name: str, rails: tuple[str, ...], roles: tuple[str, ...], model: str) -> None:
    network, n = NETWORKS[name], 3000
    point = draw(rails, roles, n, seed=33)
    volts, r = parts(point, rails, roles)
    q = q_point(solve, network, device(model), point, rails, roles)
    known = ~np.isnan(q.ic)
    assert known.sum() > n // 3
    branches = network.branches(volts, r, q)
    elements = {*roles, *(["ref"] if "vref" in rails else [])}
    assert set(branches.voltage) == set(branches.current) == elements
    assert set(branches.rail) == set(rails) - set(nodal.REFERENCE)
    circuit = nodal.Circuit(network, volts, r)
    ground = np.zeros(n)
    level = {"0": ground, **branches.nodes}
    for rail, own in nodal.given_rails(network, volts).items():
        level[rail] = -volts[own] if own in nodal.BELOW_GROUND else volts[own]
    assert set(branches.nodes) == {"b", "c", "e", *(["m"] if "vref" in rails else [])}
    level.setdefault("m", ground)
    # VBE and VCE are differences of the node voltages.
    span = sum_of_sources(volts)
    highest = np.max([np.abs(v) for v in branches.nodes.values()], axis=0) + span
    assert np.all(np.abs(level["b"] - level["e"] - q.vbe)[known] <= 1e-14 * highest[known])
    assert np.all(np.abs(level["c"] - level["e"] - q.vce)[known] <= 1e-14 * highest[known])
    # In the place of an absent resistor is a short between its nodes, or nothing.
    for role in network.roles:
        if role.name not in roles and role.absent == "short":
            one, two = (level[node] for node in role.nodes)
            assert np.all(np.abs(one - two)[known] <= 1e-14 * highest[known])
    # Sum of the currents out of each node; each is known to the rounding of the voltages over its resistance.
    out: dict[str, Array] = {}
    scale: dict[str, Array] = {}

    def flow(node: str, current: Array, size: Array) -> None:
        key = circuit.name(node)
        out[key] = out.get(key, ground) + current
        scale[key] = scale.get(key, ground) + size

    largest = np.abs(q.ib) + np.abs(q.ic) + highest * sum(1.0 / ohms for ohms in r.values())
    if "vref" in rails:
        current, size = branches.current["ref"], largest + highest / volts["r_ref"]
        allowed = 1e-14 * (highest + volts["r_ref"] * largest)
        line = volts["vref"] + volts["r_ref"] * current
        assert np.all(np.abs(branches.voltage["ref"] - line)[known] <= allowed[known])
        flow("m", current, size)
    for role in network.roles:
        if role.name in roles:
            one, two = role.nodes
            voltage, current = branches.voltage[role.name], branches.current[role.name]
            assert np.all(np.abs(voltage - (level[one] - level[two]))[known] <= 1e-13 * highest[known]), role.name
            # Ohm's law, to the rounding of the node voltages over any resistance that a current is summed from.
            allowed = 1e-14 * (highest + r[role.name] * largest)
            assert np.all(np.abs(current * r[role.name] - voltage)[known] <= allowed[known]), role.name
            size = highest / r[role.name]
            flow(one, current, size)
            flow(two, -current, size)
    for node, current in (("b", q.ib), ("c", q.ic), ("e", -(q.ib + q.ic))):
        flow(node, current, np.abs(current))
    for rail, current in branches.rail.items():
        flow(rail, current if rail in nodal.BELOW_GROUND else -current, np.abs(current))
    for node in circuit.nodes:
        assert np.all(np.abs(out[node])[known] <= 1e-12 * scale[node][known]), node


@variants
def test_rail_currents_are_the_sums_that_the_network_names(name: str, rails: tuple[str, ...], roles: tuple[str, ...]) -> None:
    network = NETWORKS[name]
    point = draw(rails, roles, 2000, seed=34)
    q = q_point(solve, network, device("junction"), point, rails, roles)
    branches = network.branches(*parts(point, rails, roles), q)
    owned = network.rail_parts(rails)
    assert set(owned) == set(rails) - set(nodal.REFERENCE)
    known = ~np.isnan(q.ic)
    for rail, names in owned.items():
        flows = [getattr(q, part) if part in ("ic", "ib") else branches.current[part[2:]] for part in names]
        total, size = sum(flows), sum(np.abs(flow) for flow in flows)
        # A sum of at most a few terms.
        assert np.all(np.abs(total - branches.rail[rail])[known] <= 1e-14 * size[known]), rail


@pytest.mark.parametrize("model", ["junction", "fixed"])
@variants
def test_rails_deliver_what_resistors_and_transistor_take(
    name: str, rails: tuple[str, ...], roles: tuple[str, ...], model: str
) -> None:
    network = NETWORKS[name]
    point = draw(rails, roles, 4000, seed=35, low=1e2, high=1e6)
    volts, r = parts(point, rails, roles)
    q = q_point(solve, network, device(model), point, rails, roles)
    branches = network.branches(volts, r, q)
    delivered = sum(volts[rail] * current for rail, current in branches.rail.items())
    resistors = [branches.voltage[role] * branches.current[role] for role in roles]
    taken = sum(resistors) + q.vce * q.ic + q.vbe * q.ib
    if "vref" in rails:
        # A reference that is fed backwards delivers: only one that conducts takes its share.
        conducts = branches.current["ref"] > 0.0
        taken = np.where(conducts, taken + branches.voltage["ref"] * branches.current["ref"], np.nan)
        delivered = np.where(conducts, delivered, np.nan)
    for region in np.unique(q.region):
        judged = (q.region == region) & ~np.isnan(q.ic)
        # Every term is known to a few roundings; so is their sum, since only VBE*IB can be negative and it is small.
        assert_allclose(taken[judged], delivered[judged], rtol=1e-12, atol=0)
    assert all(np.all(power[~np.isnan(q.ic)] >= 0.0) for power in resistors)
    assert np.sum(q.region == SATURATED) + np.sum(q.region == 0) > 1000


# ---------------------------------------------------------------------------------------------- signs


def premise(q: QPoint, point: Point) -> NDArray[np.bool_]:
    """Where the signs are claimed: current into the base, IC above ICBO, VBE above 0, a reference that conducts."""
    return (q.ib > 0.0) & (q.ic > point["icbo"]) & (q.vbe > 0.0) & (point.get("i_ref", np.ones(1)) > 0.0)


def quantities(network: Network, roles: tuple[str, ...], volts: Point, r: Point, q: QPoint) -> Point:
    branches = network.branches(volts, r, q)
    found = {"ic": q.ic, "ib": q.ib, "vce": q.vce, "vc": np.asarray(branches.nodes["c"])}
    found |= {"ve": np.asarray(branches.voltage["re"])} if "re" in roles else {}
    return found | {f"i_{name}": np.asarray(current) for name, current in branches.current.items()}


def noise(network: Network, roles: tuple[str, ...], volts: Point, r: Point, q: QPoint, point: Point) -> Point:
    """What rounding may move each quantity by: the terms that it is a difference of, times 1e-12."""
    span = sum_of_sources(volts) + np.abs(q.vbe)
    nodes = network.branches(volts, r, q).nodes
    level = span + sum(np.abs(v) for v in nodes.values()) + point["icbo"] * sum(r.values())
    roles_noise = {f"i_{role}": 1e-12 * level / r[role] for role in roles}
    if "vref" in volts:
        lower = sum((r[role] for role in ("r2",) if role in r), volts["r_ref"])
        roles_noise["i_ref"] = 1e-12 * (level / lower + level / r["r1"])
        roles_noise |= {"i_r2": roles_noise["i_ref"]} if "r2" in roles else {}
    volts_noise = dict.fromkeys(("vce", "vc", "ve"), 1e-12 * level)
    return {"ic": 1e-12 * q.ic, "ib": 1e-12 * (q.ic / point["hfe"] + point["icbo"]), **volts_noise, **roles_noise}


def parameters(rails: tuple[str, ...], roles: tuple[str, ...]) -> dict[str, str]:
    """Name of every parameter in a table of signs, and in a point: the voltage of a reference moves as its deviation does."""
    return {"delta_ref" if name == "vref" else name: name for name in (*rails, *roles, *DEVICE)}


SIGNS = [
    pytest.param(name, rails, roles, model, id=f"{name}-{'+'.join(rails)}-{'+'.join(roles)}-{model}")
    for (name, rails, roles) in (v.values for v in VARIANTS)
    for model in ("junction", "fixed")
]


@pytest.mark.parametrize(("name", "rails", "roles", "model"), SIGNS)
def test_proved_signs_hold_at_ten_thousand_points(
    name: str, rails: tuple[str, ...], roles: tuple[str, ...], model: str
) -> None:
    network, transistor, n = NETWORKS[name], device(model), 10_000
    points = draw(rails, roles, 40_000, seed=36)
    q = q_point(solve_active, network, transistor, points, rails, roles)

    def with_reference(p: Point, q: QPoint) -> Point:
        return {**p, "i_ref": quantities(network, roles, *parts(p, rails, roles), q).get("i_ref", np.ones(1))}

    meets = np.flatnonzero(premise(q, with_reference(points, q)))[:n]
    assert meets.size > n // 4
    point = {key: value[meets] for key, value in points.items()}

    def at(p: Point) -> tuple[Point, Point, QPoint]:
        volts, r = parts(p, rails, roles)
        q = q_point(solve_active, network, transistor, p, rails, roles)
        return quantities(network, roles, volts, r, q), noise(network, roles, volts, r, q, p), q

    here, rounding, _ = at(point)
    for name_in_table, parameter in parameters(rails, roles).items():
        claims = {name: network.sign(name, name_in_table) for name in here}
        if all(sign is None for sign in claims.values()):
            continue
        # A monotone quantity keeps its sign over a finite step: 0.1 % of the parameter, 1 mV of delta, and at least
        # 0.1 nA of leakage, which may be zero.
        step = {"delta": 1e-3, "icbo": 1e-3 * point["icbo"] + 1e-10}.get(parameter, 1e-3 * point[parameter])
        moved = {**point, parameter: point[parameter] + step}
        there, rounding_there, q = at(moved)
        meets_there = premise(q, with_reference(moved, q))
        for quantity, sign in claims.items():
            if sign is None:
                continue
            change = (there[quantity] - here[quantity])[meets_there]
            small = (rounding[quantity] + rounding_there[quantity])[meets_there]
            if sign == 0:
                assert np.all(np.abs(change) <= small), (quantity, parameter)
            else:
                wrong = sign * change < -small
                assert not wrong.any(), (quantity, parameter, int(wrong.sum()))


@every
def test_no_proved_sign_is_idle(network: Network) -> None:
    # Each +1 and -1 moves its quantity in some variant of the network, so that the sweep above can refute it.
    moved: set[tuple[str, str]] = set()
    for rails, roles in nodal.variants(network):
        point = draw(rails, roles, 2000, seed=37)
        volts, r = parts(point, rails, roles)
        q = q_point(solve_active, network, device("junction"), point, rails, roles)
        here, small = quantities(network, roles, volts, r, q), noise(network, roles, volts, r, q, point)
        for name_in_table, parameter in parameters(rails, roles).items():
            step = {"delta": 1e-3, "icbo": 1e-7}.get(parameter, 1e-3 * point[parameter])
            p = {**point, parameter: point[parameter] + step}
            q = q_point(solve_active, network, device("junction"), p, rails, roles)
            there = quantities(network, roles, *parts(p, rails, roles), q)
            for quantity in here:
                if np.sum(np.abs(there[quantity] - here[quantity]) > 100.0 * small[quantity]) > 20:
                    moved.add((quantity, name_in_table))
    claimed = {(a, b) for a, signs in network.signs.items() for b, sign in signs.items() if sign}
    assert claimed <= moved


# ---------------------------------------------------------------------------------------------- registration

INVENTED = '''"""Base shunted to the emitter: an invented network."""

from synth.networks.form import Branches, Network, QPoint, Rails, Resistances, Role, TwoPort, Value


def _two_port(rails: Rails, r: Resistances, t: Value) -> TwoPort:
    ra, rs, rc, re, vcc = r["ra"], r["rs"], r["rc"], r["re"], rails["vcc"]
    whole = ra + rs + re
    mutual = rs * re / whole
    return TwoPort(
        vcc * rs / whole, rs * (ra + re) / whole, mutual, vcc * (ra + rs) / whole, mutual, rc + re * (ra + rs) / whole
    )


def _branches(rails: Rails, r: Resistances, q: QPoint) -> Branches:
    ra, rs, re, vcc = r["ra"], r["rs"], r["re"], rails["vcc"]
    ve = re * (q.vbe / rs + q.ib + q.ic)
    vb, vc = ve + q.vbe, ve + q.vce
    voltage = {"ra": vcc - vb, "rs": q.vbe, "rc": vcc - vc, "re": ve}
    current = {role: v / r[role] for role, v in voltage.items()}
    return Branches(voltage, current, {"vcc": q.ic + current["ra"]}, {"b": vb, "c": vc, "e": ve})


NETWORK = Network(
    name="NAME",
    title="base shunt",
    summary="The shunt keeps leakage out of the base.",
    roles=(
        Role(name="ra", meaning="supply to base", nodes=("vcc", "b")),
        Role(name="rs", meaning="base to emitter", nodes=("b", "e")),
        Role(name="rc", meaning="collector load", nodes=("vcc", "c")),
        Role(name="re", meaning="emitter to 0 V", nodes=("e", "0")),
    ),
    two_port=_two_port,
    branches=_branches,
    signs={"ic": {"ra": -1}},
    draws={"vcc": ("ic", "i_ra")},
)
'''

counter = itertools.count()


@pytest.fixture
def package(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty importable package under a name of its own."""
    folder = tmp_path / f"invented_networks_{next(counter)}"
    folder.mkdir()
    (folder / "__init__.py").write_text("")
    monkeypatch.syspath_prepend(tmp_path)
    return folder


def test_a_new_network_is_one_new_file(package: Path) -> None:
    (package / "base_shunt.py").write_text(INVENTED.replace("NAME", "base_shunt"))
    (package / "helper.py").write_text("NETWORK = 'not one'\n")
    found = register_package(package.name)
    assert list(found) == ["base_shunt"]
    q = device("fixed")
    r = {"ra": 100e3, "rs": 20e3, "rc": 1e3, "re": 1e3}
    h = np.array([100.0, 300.0])
    stage = solve(found["base_shunt"], q, {"vcc": 12.0}, r, hfe=h, icbo=0.0, delta=0.0, temperature=298.15)
    assert stage.region.tolist() == [0, SATURATED]
    # By hand: rs takes 0.65 V/20 kohm = 32.5 uA, and 12 V = ra*(32.5 uA + IB) + 0.65 V + re*(32.5 uA + 101*IB), so that
    # IB = (12 - 3.25 - 0.65 - 0.0325) V/201 kohm. A dozen roundings of sums without much cancellation.
    assert_allclose(stage.ic[0], 100.0 * 8.0675 / 201e3, rtol=1e-13, atol=0)
    circuit = nodal.Circuit(found["base_shunt"], {"vcc": np.full(2, 12.0)}, {k: np.full(2, v) for k, v in r.items()})
    expected, saturated = nodal.solve(circuit, q, h, np.zeros(2), np.zeros(2), np.full(2, 298.15))
    assert saturated.tolist() == [False, True]
    assert_allclose(stage.ic, expected.ic, rtol=1e-12, atol=0)
    assert "base_shunt" not in NETWORKS


def test_networks_come_in_the_order_of_their_files(package: Path) -> None:
    for name in ("zulu", "alpha"):
        (package / f"{name}.py").write_text(INVENTED.replace("NAME", name))
    assert list(register_package(package.name)) == ["alpha", "zulu"]


def test_two_files_of_one_name_are_refused(package: Path) -> None:
    for name in ("alpha", "zulu"):
        (package / f"{name}.py").write_text(INVENTED.replace("NAME", "tide_gauge"))
    with pytest.raises(ValueError, match="two network files give the name 'tide_gauge'"):
        register_package(package.name)


@every
def test_registry_cannot_be_written(network: Network) -> None:
    with pytest.raises(TypeError, match="item assignment"):
        NETWORKS[network.name] = network  # type: ignore[index]
