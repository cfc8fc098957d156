"""The command ``restpoint refit``."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from synth.cli.delivery import files, is_report, progress
from synth.cli.options import (
    FORMATS,
    FOUND,
    NOT_FOUND,
    Count,
    WrongInput,
    command_line,
    key_options,
    nearest_of,
    output_options,
    read_stage,
    report_option,
)

if TYPE_CHECKING:
    from synth.stage import Stage

OWN = ("keep", "also_series", "also_stock", "top", "among", "least_vceo", "least_ic", "least_power", "package", "reason",
       "designator", "diagnose")  # fmt: skip


def _hand_over(text: str, page: Callable[[], str], stage: Stage, options: dict[str, Any]) -> None:
    """Write the answer, the request and a report where they were asked for."""
    from synth.present.files import write

    content: dict[str, Callable[[Path], str]] = {
        "--output": lambda path: text,
        "--save": lambda path: stage.to_toml(path.parent),
        "--report": lambda path: page(),
    }
    write({option: (path, content[option](path)) for option, path in files(options).items()})
    if options["output"] is None:
        click.echo(text, nl=False)


def _words(texts: Sequence[str]) -> list[str]:
    return [word for text in texts for word in text.replace(",", " ").split()]


def _designators(texts: Sequence[str]) -> dict[str, str]:
    """Role to designator, of texts such as ``r1=R17``."""
    from synth.stage_keys import ROLES

    found = {}
    for text in texts:
        role, mark, name = (part.strip() for part in text.partition("="))
        if not mark or not name or role not in (*ROLES, "q"):
            accepted = "role=NAME with a role such as r1, or q for the transistor"
            raise WrongInput(f"--designator: read {text!r}, accepted is {accepted}{nearest_of(role, (*ROLES, 'q'))}")
        found[role] = name
    return found


def _refit(stage: Stage, own: dict[str, Any], form: str) -> tuple[str, bool, Callable[[], str]]:
    """The text of a refit, whether some change will do, and its page."""
    from synth.present.change_record import to_change_list, to_change_record
    from synth.present.page import refit_to_html
    from synth.present.refit import render_refit
    from synth.replacement import Refit, refit

    designators = _designators(own["designator"])
    answer = refit(
        stage, keep=_words(own["keep"]), top=own["top"], also_series=own["also_series"], also_stock=own["also_stock"],
        progress=progress(), command=command_line(),
    )
    makers: dict[str, Callable[[Refit], str]] = {
        "table": render_refit,
        "json": Refit.to_json,
        "csv": lambda answer: to_change_list(answer, own["reason"] or "", designators),
        "markdown": lambda answer: to_change_record(answer, own["reason"] or "", designators),
    }
    return makers[form](answer), answer.passed, lambda: refit_to_html(answer)


def _scan(stage: Stage, own: dict[str, Any], form: str) -> tuple[str, bool, Callable[[], str]]:
    """The text of a scan, whether any transistor will do, and no page."""
    from synth.present.scan import render_scan, scan_csv, scan_json, scan_markdown
    from synth.replacement import least_ratings, scan

    least = least_ratings({"vceo": own["least_vceo"], "ic_max": own["least_ic"], "ptot": own["least_power"]})
    found = scan(stage, own["among"], keep=_words(own["keep"]), least=least, packages=own["package"])
    if form == "json":
        return scan_json(found, command_line()), found.passed, str
    makers = {"table": render_scan, "csv": scan_csv, "markdown": scan_markdown}
    return makers[form](found), found.passed, str


def _diagnose(stage: Stage, own: dict[str, Any], form: str) -> tuple[str, bool, Callable[[], str]]:
    """What the readings of a unit say, whether it is sound, and no page."""
    from synth.diagnosis import diagnose
    from synth.present.diagnosis import diagnosis_json, render_diagnosis

    if form not in ("table", "json"):
        raise WrongInput(f"--diagnose: goes with --format table or json, read {form!r}")
    found = diagnose(stage)
    text = diagnosis_json(found, stage.name, command_line()) if form == "json" else render_diagnosis(found, stage.name)
    return text, found.sound, str


def command(meaning: str) -> click.Command:
    """The command, with what it is for in one sentence."""

    def run(stage_file: Path | None, **options: Any) -> int:
        own = {name: options.pop(name) for name in OWN}
        if options["report"] is not None:
            is_report(options["report"], (".html",))
            other = "--diagnose" if own["diagnose"] else "--among" if own["among"] is not None else ""
            if other:
                raise WrongInput(f"--report: shows what one transistor changes, read {other} as well")
        files(options)
        stage = read_stage(stage_file, options, "refit")
        work = _diagnose if own["diagnose"] else _refit if own["among"] is None else _scan
        text, passed, page = work(stage, own, options["form"])
        _hand_over(text, page, stage, options)
        return FOUND if passed else NOT_FOUND

    return click.Command(
        "refit",
        callback=run,
        help=meaning + "\n\nThe fitted values come from [values] of the file or from --r1, --r2, ...; the new transistor from"
        " [replacement] or from --to TYPE, --to-hfe 420:800 and the like; --among tries every type of a list. --format markdown"
        " and csv write the change record.",
        params=[
            click.Argument(["stage_file"], required=False, type=click.Path(path_type=Path), metavar="[STAGE.toml]"),
            *key_options("refit"),
            click.Option(["--keep"], multiple=True, metavar="ROLE", help="A resistor that must not change, such as rc."),
            click.Option(["--also-series"], multiple=True, metavar="SERIES",
                         help="Series that a new resistor may come from besides [resistors]."),
            click.Option(["--also-stock"], metavar="FILE.csv",
                         help="Stock list that a new resistor may come from besides [resistors]."),
            click.Option(["--top"], type=Count(1, 16), default=3, show_default=True, metavar="N",
                         help="How many candidates of each number of changes to list and prove."),
            click.Option(["--among"], metavar="tables|FILE.csv",
                         help="Try every type of the built-in table or of a list: which would do with one change or none."),
            click.Option(["--least-vceo"], metavar="TEXT", help="With --among: least VCEO, such as '40 V'."),
            click.Option(["--least-ic"], metavar="TEXT", help="With --among: least collector current, such as '100 mA'."),
            click.Option(["--least-power"], metavar="TEXT", help="With --among: least power, such as '0.25 W'."),
            click.Option(["--package"], multiple=True, metavar="OUTLINE", help="With --among: outline, such as SOT-23."),
            click.Option(["--reason"], metavar="TEXT", help="Reason in the change record."),
            click.Option(["--designator"], multiple=True, metavar="ROLE=NAME",
                         help="Designator in the change record, such as r1=R17, or q=Q3 for the transistor."),
            click.Option(["--diagnose"], is_flag=True,
                         help="Tell what readings given as --measured-vb, --measured-ve and --measured-vc say of a unit."),
            *output_options(FORMATS),
            report_option(),
        ],
    )
