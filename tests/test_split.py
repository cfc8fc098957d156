"""An emitter resistor in two parts, the upper one for the signal, the lower one bypassed, both chosen together.

The gain is checked with the formula of the emitter-degenerated stage, gm·rc/(1 + (gm + gm/h)·upper), which is that of the
hybrid-pi without output resistance (Gray, Hurst, Lewis and Meyer, Analysis and Design of Analog Integrated Circuits, common
emitter with emitter degeneration, from memory); searches with full enumeration. Stages are invented.
"""

import numpy as np
import pytest
from enumeration import enumerate_all, every_index, generator
from numpy.testing import assert_allclose
from test_search import check_complete

import synth
from synth.box import Box, Meter
from synth.measures import UPPER
from synth.parts import HALVES
from synth.search import search
from synth.signal import Signal, SignalError
from synth.spaces import Space, goal_of, spaces_of
from synth.stage import Stage, StageError
from synth.transistor import thermal_voltage

REQUEST = {"supply": "12 V", "ic": "2 mA ± 30 %", "vce": "5 V", "hfe": "110 : 450", "tolerance": "1 %", "bypass": "part",
           "gain": "8 : 14", "resistors_r1_values": "39k, 43k", "resistors_r2_values": "22k, 24k",
           "resistors_rc_values": "1k8, 2k", "resistors_re_values": "120 ohm, 150 ohm, 180 ohm, 1k5, 1k6"}  # fmt: skip


def stage(**changes: object) -> Stage:
    return Stage(**{**REQUEST, **changes})  # type: ignore[arg-type]


def of_upper(spaces: list[Space], ohms: float) -> Space:
    return next(space for space in spaces if space.signal.unbypassed == ohms)


def test_every_pair_of_allowed_values_is_tried_with_each_part_on_top() -> None:
    """By hand: the upper one at most 12 V / 2 mA / 8 = 750 ohm, the lower one any of the five."""
    spaces = spaces_of(stage())
    assert [space.signal.unbypassed for space in spaces] == [120.0, 150.0, 180.0]
    for space in spaces:
        upper = space.signal.unbypassed
        assert upper is not None
        assert_allclose(space.lists["re"].nominal, upper + np.array([120.0, 150.0, 180.0, 1500.0, 1600.0]), rtol=1e-15, atol=0.0)


@pytest.mark.parametrize("changes", [{}, {"gain": "11 : 14"}, {"gain": ">= 10", "load": "10 kohm"}, {"input_resistance": "9 kohm"},
                                     {"gain": "<= 9", "tolerance": "5 %"}, {"gain": ">= 40"}])  # fmt: skip
def test_search_over_both_parts_equals_full_enumeration(changes: dict[str, object]) -> None:
    spaces, goal = spaces_of(stage(**changes)), goal_of(stage(**changes))
    rows = enumerate_all(spaces, goal)
    assert sum(len(every_index(space)) for space in spaces) > 0
    check_complete(search(spaces, goal, top=4), spaces, rows, 4)


def test_extremes_of_the_gain_are_reached_and_never_exceeded() -> None:
    """Random units with both parts of re apart, the ends of the bands among them."""
    space = of_upper(spaces_of(stage(tolerance="10 %", gain="1 : 100")), 150.0)
    box = space.box(np.array([[1, 1, 0, 3]], dtype=np.int32), Meter())
    low, high = (float(box.extreme(("gain",), side).value[0]) for side in (-1, 1))
    rng, n = generator("split"), 300_000

    def ends(u: np.ndarray) -> np.ndarray:
        return np.where(rng.random(u.size) < 0.6, np.round(u), u)

    t = 273.15 + 70.0 * ends(rng.random(n))
    many = Box(network=box.network, transistor=box.transistor, rails=box.rails, temperature=box.temperature,
               parts={role: part.take(np.zeros(n, dtype=int)) for role, part in box.parts.items()})  # fmt: skip
    values = many.values({**{axis: ends(rng.random(n)) for axis in many.axes}, "temperature": t})
    halves = box.parts["re"].pairs.halves  # type: ignore[union-attr]
    upper, lower = (a + (b - a) * ends(rng.random(n)) for a, b in (half.ends(t) for half in halves))
    values["re"] = upper + lower
    q = many.solve(values, active_law=True)
    gm, h = q.ic / thermal_voltage(t), values["hfe"] * box.transistor.gain_factor(t)
    gain = gm * values["rc"] / (1.0 + (gm + gm / h) * upper)
    assert low * (1.0 - 1e-9) <= gain.min() <= low * 1.01
    assert high * 0.99 <= gain.max() <= high * (1.0 + 1e-9)


def test_where_both_parts_sit_at_one_share_of_their_bands_they_add_up() -> None:
    space = of_upper(spaces_of(stage()), 150.0)
    box = space.box(np.array([[0, 0, 0, 3]], dtype=np.int32), Meter())
    for x in (0.0, 1.0):
        values = box.values({"re": x})
        halves = box.parts["re"].pairs.halves  # type: ignore[union-attr]
        assert_allclose(values[UPPER], halves[0].ends(values["temperature"])[int(x)], rtol=1e-14, atol=0.0)
    assert box.nominal()[UPPER] == 150.0


def test_the_answer_names_both_parts_and_a_check_agrees() -> None:
    found = synth.find(stage(), top=3)
    best = found.best
    assert best is not None
    upper, lower = best.parts["re"].ohms
    assert best.resistors["re"] == upper + lower
    assert [f"re{half}" in best.stress for half in HALVES] == [True, True]
    again = synth.check(stage(), **{role: f"{ohm} ohm" for role, ohm in best.resistors.items() if role != "re"},
                        re=f"{upper} ohm + {lower} ohm").best  # fmt: skip
    assert again is not None
    assert again.parts == best.parts
    assert again.drift == best.drift
    for name, figures in best.signal.items():
        assert_allclose(again.signal[name], figures, rtol=1e-12, atol=0.0)
    turned = synth.check(stage(), **{role: f"{ohm} ohm" for role, ohm in best.resistors.items() if role != "re"},
                         re=f"{lower} ohm + {upper} ohm").best  # fmt: skip
    assert turned is not None
    assert_allclose(turned.drift.ic, best.drift.ic, rtol=1e-12, atol=0.0)
    assert turned.signal["gain"][1] < 0.5 * best.signal["gain"][1]


def test_what_the_upper_part_is_chosen_from_is_told_and_not_saved_as_a_value() -> None:
    """By hand: VT at 25 °C is 25.69 mV, a quarter of it over 2 mA 3.21 ohm; 12 V over 2 mA and a gain of 8, 750 ohm."""
    made = stage()
    (note,) = (a for a in made.assumed if a.key == "signal.unbypassed")
    assert note.value == "3.21 Ω : 750 Ω"
    assert "\n#unbypassed = " in made.to_toml()


@pytest.mark.parametrize(
    ("changes", "match"),
    [
        ({"gain": None}, r"signal\.unbypassed is not given, but signal\.bypass is part, accepted is .* or limits\.gain"),
        ({"gain": "none"}, r"signal\.unbypassed is not given"),
    ],
)
def test_without_a_limit_on_gain_the_upper_part_has_to_be_given(changes: dict[str, object], match: str) -> None:
    with pytest.raises(StageError, match=match):
        stage(**changes)


def test_a_check_needs_both_parts() -> None:
    with pytest.raises(StageError, match=r"values\.re: read '1k8', which is one part, but signal\.bypass is part"):
        synth.check(stage(), r1="43k", r2="24k", rc="1k8", re="1k8")


def test_a_signal_needs_its_upper_part_unless_both_are_chosen() -> None:
    assert Signal(bypass="part", split=True).unbypassed is None
    with pytest.raises(SignalError, match=r"signal\.unbypassed: not given, with bypass = 'part' a resistance above 0 is needed"):
        Signal(bypass="part")
