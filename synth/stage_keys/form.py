"""What a key of a stage is: how its value is written and read."""

from __future__ import annotations

import difflib
import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Literal

from synth.preferred.pairs import read_parts, total
from synth.quantities import (
    KINDS,
    Interval,
    RestpointError,
    Spread,
    Target,
    format_exact,
    format_limit,
    format_spread,
    format_target,
    parse,
    parse_limit,
    parse_spread,
    parse_target,
)

Form = Literal["spread", "target", "limit", "quantity", "quantities", "resistor", "text", "choice", "texts"]
Given = str | float | Spread | Interval | Target | os.PathLike[str] | Sequence[str | float] | None
"""What `Stage` takes for a key: text, number in SI units, value of `synth.quantities`, path, list of texts or numbers.

None counts as not given.
"""

NONE = "none"
"""Text that switches a limit off."""

SWITCH = {True: "yes", False: "no"}
"""What a truth value stands for where both words are choices."""

NEAREST_SHOWN = 3
LONGEST_NUMBER = 1024
"""Length above which a whole number is beyond the floating-point range [bit]."""


class StageError(RestpointError):
    """A stage that contradicts itself, or a key that no stage has.

    Parameters
    ----------
    field : str
        Name of the field, as the user knows it.
    read : object
        What was read; None where something is missing.
    reason : str
        Why it is refused, as a clause that follows "read ...,".
    accepted : str
        What the field accepts.
    nearest : tuple of str
        Nearest choices that are accepted; may be empty.
    """

    def __init__(self, field: str, read: object, reason: str, accepted: str, nearest: Iterable[str] = ()) -> None:
        # All arguments go to the base, so that the error survives the way home from a worker process.
        super().__init__(field, read, reason, accepted, tuple(nearest))
        self.field = field
        self.read = read
        self.reason = reason
        self.accepted = accepted
        self.nearest = tuple(nearest)

    def __str__(self) -> str:
        nearest = f", nearest is {' or '.join(map(repr, self.nearest))}" if self.nearest else ""
        ending = f"accepted is {self.accepted}{nearest}"
        if self.read is None:
            return f"{self.field} {self.reason.removeprefix('which ')}, {ending}"
        return f"{self.field}: read {str(self.read)[:200]!r}, {self.reason}, {ending}"


@dataclass(frozen=True, kw_only=True)
class Key:
    """One key of a stage.

    Parameters
    ----------
    path : str
        Table and key, as in "supply.vcc".
    form : {"spread", "target", "limit", "quantity", "quantities", "resistor", "text", "choice", "texts"}
        How its value is written; "quantities" and "texts" are lists, "choice" is one of `choices`, "resistor" is a resistance
        or a pair, of which the total counts.
    kind : str
        Kind of quantity, a key of `synth.quantities.KINDS`; "" for words.
    rule : str
        Of a spread, where the nominal value of two ends lies (see `parse_spread`), besides "ceiling": a single value is
        the upper end of a spread from zero, and "symmetric": a single value stands for plus and minus. Of a limit, its
        natural sense.
    short : str
        Short name, as an argument and, with hyphens, as an option; "" if there is none.
    choices : tuple of str
        Words accepted by a "choice", and by "texts" that come from a short list.
    meaning : str
        One sentence.
    example : str
        A text that is accepted; the items of a list have commas between them.
    default : str
        Text that stands for the key when it is not given; "" if that is nothing, or depends on other keys.
    otherwise : str
        What holds when the key is not given, in words; `default` if that says it.
    needed : bool
        Whether every stage has to give it.
    names : tuple of str
        Names as an argument of `Stage`, the preferred one first.
    """

    path: str
    form: Form
    kind: str = ""
    rule: str = "mean"
    short: str = ""
    choices: tuple[str, ...] = ()
    meaning: str
    example: str
    default: str = ""
    otherwise: str = ""
    needed: bool = False
    names: tuple[str, ...] = ()

    @property
    def table(self) -> str:
        """Table that the key stands in, "" for the top of the file."""
        return self.path.rpartition(".")[0]

    @property
    def leaf(self) -> str:
        """Name of the key inside its table."""
        return self.path.rpartition(".")[2]

    @property
    def flat(self) -> str:
        """Path as one word, as in "supply_vcc": the argument that every key has."""
        return self.path.replace(".", "_")

    @property
    def options(self) -> tuple[str, ...]:
        """Names as an option of the command line, the short form first."""
        words = dict.fromkeys(filter(None, (self.short, self.flat)))
        return tuple(f"--{word.replace('_', '-')}" for word in words)

    @property
    def many(self) -> bool:
        """Whether the value is a list."""
        return self.form in ("quantities", "texts")

    def read(self, text: str) -> Any:
        """Value of a text.

        Parameters
        ----------
        text : str
            Text as a file, an option or `text` gives it; a list has commas between its items.

        Returns
        -------
        Spread, Target, Interval, float, str or tuple
            By form; SI units. A limit of "none" is None.

        Raises
        ------
        QuantityError
            If the text is not the quantity it should be.
        StageError
            If a word is none of the choices or cannot be printed.
        """
        if self.form == "spread":
            return self._spread(text)
        if self.form == "target":
            return parse_target(text, self.kind, self.path)
        if self.form == "limit":
            is_off = self.table == "limits" and text.strip().casefold() == NONE
            return None if is_off else parse_limit(text, self.kind, self.path, self.rule)
        if self.form == "quantity":
            return parse(text, self.kind, self.path)
        if self.form == "resistor":
            return total(*read_parts(text, self.path))
        if self.form == "quantities":
            return tuple(parse(item, self.kind, self.path) for item in self.items(text))
        if self.form == "texts":
            return tuple(dict.fromkeys(self._word(item) for item in self.items(text)))
        return self._word(text)

    def write(self, value: Any) -> str:
        """Text of a value; `read` gives the value back.

        Parameters
        ----------
        value : Spread, Target, Interval, float, str or tuple
            As `read` returns it.

        Returns
        -------
        str
            The text.
        """
        if self.form == "spread":
            return self._spread_text(value)
        if self.form == "target":
            return format_target(value, self.kind)
        if self.form == "limit":
            is_open = value is None or (value.low == -float("inf") and value.high == float("inf"))
            return NONE if is_open else format_limit(value, self.kind)
        if self.form in ("quantity", "resistor"):
            return format_exact(value, self.kind)
        if self.form == "quantities":
            return ", ".join(format_exact(item, self.kind) for item in value)
        return ", ".join(value) if self.form == "texts" else str(value)

    def text(self, given: object) -> str:
        """Text of whatever a program gives for this key.

        Parameters
        ----------
        given : str, float, Spread, Interval, Target, path or sequence
            See `Given`.

        Returns
        -------
        str
            A text stays as it is.

        Raises
        ------
        QuantityError
            If a number or value does not suit the key.
        StageError
            If it is of another type.
        """
        if isinstance(given, str):
            return given
        if self.many and isinstance(given, Sequence):
            return ", ".join(self._item_text(item) for item in given)
        if self.many and self.kind:
            return self._item_text(given)
        if not self.kind:
            if isinstance(given, bool) and set(SWITCH.values()) <= set(self.choices):
                return SWITCH[given]
            if isinstance(given, os.PathLike):
                return str(os.fspath(given))
            raise StageError(self.path, given, "which is no text", self.accepted, [self.example])
        if self.form == "spread":
            spread = parse_spread(given, self.kind, self.path)  # type: ignore[arg-type]
            # A number alone, unlike a spread, means what a single value means to this key.
            return self.write(spread) if isinstance(given, Spread) else format_exact(spread.nominal, self.kind)
        if self.form == "target":
            return self.write(parse_target(given, self.kind, self.path))  # type: ignore[arg-type]
        if self.form == "limit":
            return self.write(parse_limit(given, self.kind, self.path, self.rule))  # type: ignore[arg-type]
        return format_exact(parse(given, self.kind, self.path), self.kind)  # type: ignore[arg-type]

    def text_of_toml(self, value: object) -> str:
        """Text of a value in a stage file, where a bare number stands for a pure number only.

        Parameters
        ----------
        value : object
            As the reader of TOML gives it.

        Returns
        -------
        str
            The text.

        Raises
        ------
        StageError
            If it is neither a text nor, where a pure number is meant, a number; shows how to write it.
        """
        items = value if isinstance(value, list) and self.many else [value]
        return ", ".join(self._toml_item(item) for item in items)

    def _toml_item(self, item: object) -> str:
        if isinstance(item, str):
            return item
        if isinstance(item, bool) and set(SWITCH.values()) <= set(self.choices):
            return SWITCH[item]
        if isinstance(item, int) and item.bit_length() > LONGEST_NUMBER:
            raise StageError(self.path, None, "is a number beyond every quantity", self.accepted)
        is_number = isinstance(item, int | float) and not isinstance(item, bool)
        if is_number and self.kind and "" in KINDS[self.kind].units:
            return repr(item)
        title = {bool: "a truth value", dict: "a table", list: "a list"}.get(type(item), "a date or time")
        if is_number and self.kind:
            title, write = "a number without a unit", f'"{item} {KINDS[self.kind].typed}"'
        else:
            title = "a number" if is_number else title
            examples = [f'"{example}"' for example in self.items(self.example)]
            write = f"[{', '.join(examples)}]" if len(examples) > 1 else examples[0]
        raise StageError(self.path, item, f"which is {title}", f"{self.accepted}: write {write}")

    @property
    def accepted(self) -> str:
        """What the key accepts, for messages and help."""
        if self.choices:
            return f"one of {', '.join(self.choices)}"
        if self.form == "resistor":
            return f"{KINDS[self.kind].accepted}; or two joined, as in '33k + 1k5' or '10k || 22k'"
        return KINDS[self.kind].accepted if self.kind else f"a text such as {self.example!r}"

    def _spread(self, text: str) -> Spread:
        if self.rule == "symmetric":
            alone = text.strip().removeprefix("±").removeprefix("+-").removeprefix("+/-")
            if ":" not in alone and "±" not in alone and "+-" not in alone and "+/-" not in alone:
                width = parse(alone, self.kind, self.path)
                if width < 0.0:
                    both = f"{format_exact(width, self.kind)} : {format_exact(0.0, self.kind)}"
                    accepted = "one value without a sign, which counts plus and minus, or low : high"
                    raise StageError(self.path, text, "which is negative", accepted, [alone.lstrip("-−"), both])
                return Spread(-width, 0.0, width)
        if self.rule == "ceiling" and ":" not in text:
            spread = parse_spread(text, self.kind, self.path)
            is_single = spread.width == 0.0 and spread.high > 0.0
            return Spread(0.0, 0.0, spread.high) if is_single else spread
        named = self.rule if self.rule in ("geometric", "ambient") else "mean"
        return parse_spread(text, self.kind, self.path, named)

    def _spread_text(self, value: Spread) -> str:
        if self.rule == "symmetric" and -value.low == value.high and value.nominal == 0.0:
            return format_exact(value.high, self.kind)
        if self.rule in ("symmetric", "ceiling") and value.width == 0.0 and value.high != 0.0:
            # One value alone would be read as a wider spread.
            return " : ".join([format_exact(value.high, self.kind)] * 2)
        if self.rule == "geometric" and value.width:
            ends = format_limit(Interval(value.low, value.high), self.kind)
            if self._spread(ends) == value:
                return ends
        return format_spread(value, self.kind)

    def items(self, text: str) -> list[str]:
        """Items of the text of a list; a text that is no list is its only item.

        Parameters
        ----------
        text : str
            Text of the key.

        Returns
        -------
        list of str
            The items without blanks around them.
        """
        # "4,7k" is one resistance: there only a comma with a gap behind it, or a semicolon, parts two items.
        separator = ", " if self.form == "quantities" else ","
        items = text.replace(";", separator).split(separator) if self.many else [text]
        return [item.strip() for item in items]

    def _item_text(self, item: object) -> str:
        if isinstance(item, str):
            return item
        if not self.kind:
            raise StageError(self.path, item, "which is no text", self.accepted, [self.example])
        return format_exact(parse(item, self.kind, self.path), self.kind)  # type: ignore[arg-type]

    def _word(self, text: str) -> str:
        word = text.strip()
        if not word.isprintable() or not word:
            reason = "which is empty" if not word else "which has characters that cannot be printed"
            raise StageError(self.path, text, reason, self.accepted, [self.example])
        if not self.choices:
            return word
        known = {choice.casefold(): choice for choice in self.choices}
        found = known.get(word.casefold().replace("-", "_")) or known.get(word.casefold())
        if found is None:
            raise StageError(self.path, word, "which is unknown", self.accepted, nearest(word, self.choices))
        return found


def nearest(read: str, known: Iterable[str]) -> tuple[str, ...]:
    """Known names that are likely meant.

    Parameters
    ----------
    read : str
        What was read.
    known : iterable of str
        Names that are accepted.

    Returns
    -------
    tuple of str
        Names with the same last part if there are any, else the nearest in spelling; never empty if any is known.
    """
    names = list(known)
    leaf = read.rpartition(".")[2].casefold()
    same = [name for name in names if name.rpartition(".")[2].casefold() == leaf]
    close = difflib.get_close_matches(read, names, NEAREST_SHOWN, 0.6)
    return tuple((same or close or difflib.get_close_matches(read, names, 1, 0.0))[:NEAREST_SHOWN])
