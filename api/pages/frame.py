"""The frame that every page stands in, and how to add a page to it.

A page is a module here with a `router`, a template that begins `{% extends "frame.html" %}`, and a
line in `api/app.py`:

    @router.get("/week")
    def week(daemon: TheDaemon) -> HTMLResponse:
        return page(daemon, "week.html", here="/week", title="The week", log=...)

The template fills the blocks `lead` (the answer in one line, in the header) and `main`. It has the
filters of `api/pages/words.py` (`{{ kg | volume }}`, `{{ at_us | day_and_time }}`: arguments are SI
and microseconds) and these names: `site`, `us` (whether the shop has US units), `now_us`, `here`,
`token`, `words`. Macros are in `parts.html` (import them `with context`).

What the script (`api/static/page.js`) gives a page that asks for it in its markup; without script
the forms are ordinary ones:

- an element with `data-fresh` and an `id` is replaced by the same element of the page as it is
  now, every 15 s and after each write, unless somebody is typing in it;
- a `<form data-send="/api/v1/...">` is sent as JSON by `send(path, body)`, kept when there is no
  network and sent once; its fields' names are the body's. `data-number` on a field makes a number
  of it, `data-with="volume"` leaves it out where that one is empty; `data-keyed` on the form adds
  an idempotency `key`, `data-dated` an `at` where it comes late. The answer goes to the `<output>`
  in it or to the one that `data-says` names: `said` of the answer, else `data-done`.

Policy: no inline script, no `style=""`, no other host; drawings are inline SVG with attributes.
"""

from __future__ import annotations

import inspect
from collections.abc import Callable
from pathlib import Path
from typing import Any

from jinja2 import DictLoader, Environment, StrictUndefined, pass_context
from jinja2.runtime import Context
from starlette.responses import HTMLResponse

from api.pages.forms import TOKEN
from api.pages.words import Words
from daemon.views import Running

TEMPLATES = Path(__file__).resolve().parent.parent / "templates"
# in the order of the navigation: address, name, what it answers
PAGES = (
    ("/round", "Round", "What to drain, in walking order"),
    ("/spray", "Spray", "Whether it is dry enough"),
    ("/week", "Week", "The week's moisture log"),
    ("/line", "Line", "The stations as they are now"),
)


def _filter(name: str) -> Callable[..., str]:
    """A method of the shop's words as a filter."""

    @pass_context
    def shown(context: Context, *arguments: Any) -> str:
        words: Words = context["words"]
        said: str = getattr(words, name)(*arguments)
        return said

    return shown


def _with_degree_signs(value: object) -> object:
    """What is shown, with a sign where plain text says "degC"."""
    if not isinstance(value, str) or "deg" not in value:
        return value
    return value.replace("degC", "\N{DEGREE SIGN}C").replace("degF", "\N{DEGREE SIGN}F")


def _place(points: float) -> str:
    """A place in a drawing, as short as can be: a page has hundreds."""
    return f"{points:.1f}".removesuffix(".0")


def _environment() -> Environment:
    # read once: an update beside a running daemon must not mix its templates with this program
    texts = {path.name: path.read_text("utf-8") for path in sorted(TEMPLATES.glob("*.html"))}
    made = Environment(
        loader=DictLoader(texts),
        autoescape=True,
        undefined=StrictUndefined,
        finalize=_with_degree_signs,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    names = (name for name, _ in inspect.getmembers(Words, inspect.isfunction))
    made.filters.update({name: _filter(name) for name in names if not name.startswith("_")})
    made.filters["place"] = _place
    made.globals.update(pages=PAGES, token=TOKEN)
    return made


_ENVIRONMENT = _environment()


def page(
    daemon: Running, template: str, *, here: str, title: str, status: int = 200, **content: Any
) -> HTMLResponse:
    """A page, rendered. `here` is its address in the navigation, "/" for the start."""
    site = daemon.site
    text = _ENVIRONMENT.get_template(template).render(
        site=site,
        us=site.units == "us",
        words=Words(site),
        here=here,
        title=title,
        now_us=daemon.clock.now_us(),
        **content,
    )
    return HTMLResponse(text, status)
