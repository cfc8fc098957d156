"""The stage with the old and with the new transistor, side by side."""

from __future__ import annotations

import math
from collections.abc import Iterator

from synth import catalogue
from synth.answer import Candidate, Caution
from synth.catalogue import TransistorRow
from synth.quantities import RestpointError, Spread, format_quantity
from synth.replacement.answer import Compared, Device, Standing
from synth.stage import Stage, StageError
from synth.stage_keys import KEYS, Given, nearest

SAME = 5e-4
"""Difference below which two shares, margins or drifts are the same [-]: less than the digits that are printed."""
FAR_FT = 3.0
"""Ratio of transition frequencies from which a swap deserves caution [-]."""
FAR_LEAKAGE = 10.0
"""Ratio of leakage limits from which a swap deserves caution [-]."""

_OF_MATERIAL = ("type", "vbe", "vbe_ic", "icbo", "vce_sat")
"""Figures that say nothing of a transistor of another material."""
_RATING = {"vceo": "VCEO", "ic": "IC", "power": "power"}
_SIGNAL_KINDS = {"gm": "conductance", "gain": "gain", "swing": "voltage", "bypass_capacitor": "capacitance"}
_STAYS = ("vbe_model",)
"""Keys that describe the calculation, not the type."""


def sides(stage: Stage) -> tuple[Stage, Stage]:
    """A stage with the transistor of today, and with its replacement.

    Parameters
    ----------
    stage : Stage
        With ``[replacement]``.

    Returns
    -------
    before, after : Stage
        Both without ``[replacement]``. Another type brings its own figures and ratings; without a type the keys given
        override those of the transistor of today.

    Raises
    ------
    StageError
        If no replacement is given, its type is unknown, or it has the other polarity.
    """
    if not stage.replacement:
        accepted = "--to TYPE, --to-hfe SPREAD or a table [replacement] in the stage file"
        raise StageError("replacement", None, "is not given", accepted, ["--to BC847C"])
    before = stage.with_keys({path: None for path in stage.given if KEYS[path].table == "replacement"})
    given = {KEYS[path].leaf: text for path, text in stage.given.items() if KEYS[path].table == "replacement"}
    old = {KEYS[path].leaf: path for path in before.given if KEYS[path].table == "transistor"}
    dropped: set[str] = set()
    if "type" in given:
        _known(given["type"])
        dropped = set(old) - set(_STAYS)
    elif given.get("material", before.transistor.material) != before.transistor.material:
        dropped = set(_OF_MATERIAL) & set(old)
    keys: dict[str, Given] = {f"transistor.{leaf}": None for leaf in dropped}
    keys |= {f"transistor.{leaf}": text for leaf, text in given.items()}
    # What was measured of the unit that is taken out says nothing of the one that is put in.
    keys |= {path: None for path in ("measured.hfe", "measured.vbe") if path in before.given}
    try:
        after = before.with_keys(keys)
    except StageError as error:
        table, _, leaf = error.field.partition(".")
        if table != "transistor":
            raise
        raise StageError(f"replacement.{leaf}", error.read, error.reason, error.accepted, error.nearest) from None
    if after.transistor.polarity != before.transistor.polarity:
        own, other = before.transistor.polarity, after.transistor.polarity
        field = "replacement.type" if after.transistor.type else "replacement.polarity"
        alike = [name for name, row in catalogue.transistors().items() if row.polarity == own]
        near = nearest(after.transistor.type, alike)[:1] if after.transistor.type else (own,)
        read = after.transistor.type or other
        raise StageError(field, read, f"which is {other}, but the stage has an {own}", f"an {own}", near)
    return before, after


def _known(kind: str) -> None:
    try:
        catalogue.transistor(kind)
    except RestpointError:
        near = nearest(kind.upper(), catalogue.transistors())
        accepted = "a row of the table of transistors, or --to-hfe and the other figures of one that is not there"
        raise StageError("replacement.type", kind, "which is unknown", accepted, near) from None


def row_of(stage: Stage) -> TransistorRow | None:
    """Row of the table of transistors that a stage takes its figures from.

    Parameters
    ----------
    stage : Stage
        Any stage.

    Returns
    -------
    TransistorRow or None
        None where the transistor is given by its figures.
    """
    return catalogue.transistor(stage.transistor.type) if stage.transistor.type else None


def device(stage: Stage, label: str = "") -> Device:
    """The transistor of a stage as it is counted.

    Parameters
    ----------
    stage : Stage
        Any stage.
    label : str
        What to call it; the type, else its gain, when empty.

    Returns
    -------
    Device
        What is known of it.
    """
    t, row = stage.transistor, row_of(stage)
    own_gain = "transistor.hfe" in stage.given
    why = next((a.why for a in stage.assumed if a.key == "transistor.hfe"), "given")
    ends = [f"{end:g}" for end in dict.fromkeys((t.hfe.low, t.hfe.high))]
    return Device(
        label=label or t.type or f"hFE {' to '.join(ends)}",
        type=t.type,
        polarity=t.polarity,
        material=t.material,
        hfe=_three(t.hfe),
        gain_source=why,
        gain_ic=None if row is None or own_gain else row.hfe_ic_a,
        gain_vce=None if row is None or own_gain else row.hfe_vce_v,
        vbe=_three(t.vbe),
        vbe_ic=t.vbe_ic,
        icbo=t.icbo.high,
        vce_sat=t.vce_sat,
        package=None if row is None else row.package,
        pins=None,
        ft=None if row is None else row.ft_hz,
        vceo=stage.ratings.vceo,
        ic_max=stage.ratings.ic_max,
        ptot=stage.ratings.ptot,
    )


def _three(spread: Spread) -> tuple[float, float, float]:
    return spread.low, spread.nominal, spread.high


def swap_cautions(old: Device, new: Device) -> tuple[Caution, ...]:
    """What a swap brings besides another Q-point.

    Parameters
    ----------
    old, new : Device
        The two transistors.

    Returns
    -------
    tuple of Caution
        Each with its reason.
    """
    return tuple(Caution(name=name, text=text) for name, text in _swap(old, new))


def _swap(old: Device, new: Device) -> Iterator[tuple[str, str]]:
    if old.type != new.type:
        if old.package is not None and new.package is not None and old.package != new.package:
            yield "package", f"{old.label} comes in {old.package}, {new.label} in {new.package}: footprint and cooling change."
        if old.pins is not None and new.pins is not None and old.package == new.package and old.pins != new.pins:
            yield "pinout", f"pins of {old.label} are {old.pins}, of {new.label} {new.pins}: cross the leads or turn the part."
    if old.material != new.material:
        volts = format_quantity(abs(new.vbe[1] - old.vbe[1]), "voltage")
        higher = "more" if new.vbe[1] > old.vbe[1] else "less"
        yield (
            "vbe_class",
            f"from {old.material} to {new.material} the base needs about {volts} {higher} for the same IC: an emitter voltage"
            f" kept by the old divider moves by that much.",
        )
    if old.ft is not None and new.ft is not None:
        ratio = new.ft / old.ft
        if ratio >= FAR_FT:
            yield (
                "transition_frequency",
                f"fT rises {ratio:.2g} times, to {format_quantity(new.ft, 'frequency')}: look for oscillation with the real"
                " wiring; a resistor of some ten ohm close to the base helps.",
            )
        elif ratio <= 1.0 / FAR_FT:
            yield (
                "transition_frequency",
                f"fT falls {1.0 / ratio:.2g} times, to {format_quantity(new.ft, 'frequency')}: gain and phase at the upper end"
                " of the band were not looked at.",
            )
    if min(old.icbo, new.icbo) > 0.0 and new.icbo / old.icbo >= FAR_LEAKAGE:
        yield (
            "leakage",
            f"the leakage limit rises {new.icbo / old.icbo:.2g} times, to {format_quantity(new.icbo, 'current')}: the hot end"
            " of the box decides sooner.",
        )
    if min(old.icbo, new.icbo) > 0.0 and old.icbo / new.icbo >= FAR_LEAKAGE:
        yield (
            "leakage",
            f"the leakage limit falls {old.icbo / new.icbo:.2g} times, to {format_quantity(new.icbo, 'current')}: parts that"
            " made up for the old leakage may go.",
        )


def not_verified(old: Device, new: Device) -> tuple[Caution, ...]:
    """What a calculation of the Q-point leaves open about a swap.

    Parameters
    ----------
    old, new : Device
        The two transistors.

    Returns
    -------
    tuple of Caution
        What somebody has to look up or measure.
    """
    pins = f"{new.pins} of {new.label}, from memory" if new.pins else "not in the table"
    package = new.package or "not known"
    ft = "not known" if new.ft is None else f"{format_quantity(new.ft, 'frequency')} in the table"
    found = [
        ("pinout", f"order of the leads ({pins}): compare both data sheets"),
        ("package", f"outline and footprint ({package}), mounting and cooling"),
        ("gain_bandwidth", f"gain-bandwidth product and capacitances ({ft}): response at the upper end, stability"),
        ("noise", "noise at the impedance of the source"),
        ("gain", f"hFE {new.hfe[0]:g} to {new.hfe[2]:g} of the lot that is bought: {new.gain_source}"),
    ]
    return tuple(Caution(name=name, text=text) for name, text in found)


# --- Side by side ---------------------------------------------------------------------------------------------------


def compare(before: Candidate, after: Candidate) -> tuple[Compared, ...]:
    """Every figure of two verdicts side by side.

    Parameters
    ----------
    before, after : Candidate
        The same resistors or others, with the old and the new transistor.

    Returns
    -------
    tuple of Compared
        Q-point, worst case, drift, margins, stress, signal.
    """
    return tuple(_lines(before, after))


def _lines(before: Candidate, after: Candidate) -> Iterator[Compared]:
    yield from _q_point(before, after)
    margins = [{v.name: v.margin for v in candidate.limits} for candidate in (before, after)]
    for name in dict.fromkeys((*margins[0], *margins[1])):
        line = _share(f"margin.{name}", f"margin of {name}", margins[0].get(name), margins[1].get(name), 1)
        if line.before is not None or line.after is not None:
            yield line
    yield from _stress(before, after)
    yield _moved("supply_current", "supply current", "current", before.supply_current, after.supply_current, -1)
    for name in before.signal:
        if name in after.signal:
            kind = _SIGNAL_KINDS.get(name, "resistance")
            words = f"{name.replace('_', ' ')}, nominal"
            yield _moved(f"signal.{name}", words, kind, before.signal[name][1], after.signal[name][1])


def _q_point(before: Candidate, after: Candidate) -> Iterator[Compared]:
    kinds = {name: "current" if name == "ic" else "voltage" for name in before.worst}
    for name, kind in kinds.items():
        old, new = getattr(before.nominal, name), getattr(after.nominal, name)
        yield _moved(f"nominal.{name}", f"{name.upper()} nominal", kind, old, new)
    old_drift, new_drift = before.drift.of(), after.drift.of()
    for name, kind in kinds.items():
        # A span has no good side of its own; where it has a target, its drift tells.
        drift = _share("", "", old_drift.get(name), new_drift.get(name), -1)
        yield Compared(
            name=f"worst.{name}", what=f"{name.upper()} over the box", kind=kind, before=before.worst[name],
            after=after.worst[name], by=drift.by, standing=drift.standing,
        )  # fmt: skip
    for name, share in old_drift.items():
        yield _share(f"drift.{name}", f"drift of {name.upper()}", share, new_drift.get(name), -1)
    yield _share("drift.q_point", "drift of the Q-point", before.drift.q_point, after.drift.q_point, -1)
    yield _share("centring", "centring", before.centring, after.centring, -1)


def _stress(before: Candidate, after: Candidate) -> Iterator[Compared]:
    old, new = before.transistor, after.transistor
    if old is not None and new is not None:
        yield _moved("transistor.power", "power of the transistor", "power", old.power, new.power, -1)
        yield _moved("transistor.ic", "greatest IC", "current", old.ic, new.ic, -1)
        judged = {v.name for candidate in (before, after) for v in candidate.limits}
        for name in dict.fromkeys((*old.used, *new.used)):
            if f"transistor_stress.{name}" in judged:
                # Its margin says the same.
                continue
            words = f"used of the allowed {_RATING.get(name, name)}"
            yield _share(f"used.{name}", words, old.used.get(name), new.used.get(name), -1)
        if old.junction is not None and new.junction is not None:
            yield _moved("transistor.junction", "junction temperature", "temperature", old.junction, new.junction, -1)
    for role, stress in before.stress.items():
        if role in after.stress:
            yield _moved(f"power.{role}", f"power of {role.upper()}", "power", stress.power, after.stress[role].power, -1)


def _finite(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else value


def _share(name: str, what: str, before: float | None, after: float | None, good: int) -> Compared:
    """A drift, margin or used share; `good` is +1 where more is better."""
    old, new = _finite(before), _finite(after)
    by = None if old is None or new is None else new - old
    return Compared(name=name, what=what, kind="ratio", before=old, after=new, by=by, standing=_standing(by, good))


def _moved(name: str, what: str, kind: str, before: float | None, after: float | None, good: int = 0) -> Compared:
    """A figure with a unit; `good` is +1 where more is better, 0 where neither is."""
    old, new = _finite(before), _finite(after)
    by = None if not old or new is None else new - old if kind == "temperature" else new / old - 1.0
    return Compared(name=name, what=what, kind=kind, before=old, after=new, by=by, standing=_standing(by, good))


def _standing(by: float | None, good: int) -> Standing:
    if by is None:
        return "moved"
    if abs(by) < SAME:
        return "same"
    if good == 0:
        return "moved"
    return "better" if by * good > 0.0 else "worse"
