"""The answer as one self-contained page: everything is in the file, and nothing leaves it.

Every candidate stands in the page in full, so that it reads and prints without its script; the script only switches, sorts
and filters. Style and script are named by their hashes in the page's Content-Security-Policy, which forbids every request.
"""

from __future__ import annotations

import hashlib
from base64 import b64encode
from collections.abc import Mapping
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

from synth.answer import Answer
from synth.present.page.candidates import entries, listing, views
from synth.present.page.lead import lead, notes, review, title

if TYPE_CHECKING:
    import jinja2

    from synth.boards import BoardAnswer
    from synth.replacement import Refit


def to_html(answer: Answer) -> str:
    """The answer as a page.

    Parameters
    ----------
    answer : Answer
        Of `find` or `check`.

    Returns
    -------
    str
        A whole HTML document that asks for nothing outside of itself.
    """
    found = entries(answer)
    finds = answer.kind == "find"
    least = "drift" if answer.search is None or answer.search.metric == "corners" else answer.search.metric
    return render(
        "answer.html.j2",
        {
            "title": title(answer),
            "kind": "Bias resistors found" if finds else "Bias resistors judged",
            "lead": lead(answer),
            "above": [],
            "listing": listing(f"Candidates, least {least} first" if finds else "Fitted resistors", "rank", found),
            "candidates": views(found),
            "review": review(answer),
            "notes": notes(answer),
            "command": answer.command,
            "version": answer.version,
        },
    )


def board_to_html(answer: BoardAnswer) -> str:
    """The answer for a board as a page.

    Parameters
    ----------
    answer : BoardAnswer
        Of `synth.board`.

    Returns
    -------
    str
        As `to_html`.
    """
    from synth.present.page.boards_view import board_page

    return render("answer.html.j2", board_page(answer))


def refit_to_html(refit: Refit) -> str:
    """The answer to a replaced transistor as a page.

    Parameters
    ----------
    refit : Refit
        Of `synth.refit`.

    Returns
    -------
    str
        As `to_html`.
    """
    from synth.present.page.refits_view import refit_page

    return render("answer.html.j2", refit_page(refit))


def render(template: str, content: Mapping[str, Any]) -> str:
    """A template of this folder, filled in.

    Parameters
    ----------
    template : str
        Its file name.
    content : mapping
        What it names; texts are escaped.

    Returns
    -------
    str
        A whole HTML document with style, script and a policy that admits these two alone.
    """
    from markupsafe import Markup

    style, script = _file("style.css"), _file("script.js")
    policy = "; ".join(
        [
            "default-src 'none'",
            f"script-src {_source(script)}",
            f"style-src {_source(style)}",
            "base-uri 'none'",
            "form-action 'none'",
        ]
    )
    # The two files are the project's own; everything else of the page is escaped.
    return _environment().get_template(template).render(
        **content, policy=policy, style=Markup(style), script=Markup(script)
    )  # fmt: skip


def _source(text: str) -> str:
    """A text as a Content-Security-Policy names it."""
    return f"'sha256-{b64encode(hashlib.sha256(text.encode()).digest()).decode()}'"


@cache
def _file(name: str) -> str:
    return files("synth.present.page").joinpath(name).read_text(encoding="utf-8")


@cache
def _environment() -> jinja2.Environment:
    import jinja2

    return jinja2.Environment(
        loader=jinja2.FunctionLoader(_file),
        autoescape=True,
        trim_blocks=True,
        lstrip_blocks=True,
        undefined=jinja2.StrictUndefined,
    )
