"""One page over many jobs: how many were released, and for each the verdict, the gains and the first reason."""

import os
from collections import Counter
from collections.abc import Sequence
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import quote

from ..figures.svg import variables

if TYPE_CHECKING:
    from ..plugin.jobs import Done

ORDER = ("fault", "wrong call", "bad log", "stopped early", "held", "released")
MEANS = {
    "released": "checked by calculation; the responsible person still approves",
    "held": "done, and not to be loaded: the reasons say what to do",
    "stopped early": "the run ended before its end; nothing was tuned from it",
    "bad log": "a log can't be used",
    "wrong call": "the rig file is wrong",
    "fault": "a fault of the program",
}


def overview_html(ended: "Sequence[Done]", asked: int, folder: Path) -> str:
    """The page; nothing in it is fetched from elsewhere, and every name and reason is escaped.

    Parameters
    ----------
    ended : sequence of Done
    asked : int
        How many jobs there are in all.
    folder : Path
        Where the page will stand: the links to the reports are relative to it.
    """
    from jinja2 import Environment, StrictUndefined
    from markupsafe import Markup

    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    template = environment.from_string(_resource("overview.html"))
    return template.render(page=_page(ended, asked, folder), style=Markup(_style()))


def _resource(name: str) -> str:
    return files(__package__).joinpath(name).read_text(encoding="utf-8")


def _style() -> str:
    dark = f"@media screen and (prefers-color-scheme: dark) {{ :root {{ {variables('dark')} }} }}"
    return f":root {{ {variables('light')} }} {dark}\n{_resource('look.css')}"


def _page(ended: "Sequence[Done]", asked: int, folder: Path) -> dict[str, Any]:
    counts = Counter(done.status for done in ended)
    base = Path(os.path.commonpath([done.folder for done in ended])) if ended else folder
    return {
        "asked": asked,
        "ended": len(ended),
        "released": counts["released"],
        "counts": [(status, counts[status], MEANS[status]) for status in reversed(ORDER) if counts[status]],
        "rows": [_row(done, base, folder) for done in ended],
    }


def _row(done: "Done", base: Path, folder: Path) -> dict[str, Any]:
    report = done.folder / "report.html"
    lines = done.said.splitlines()
    return {
        "name": _short(done, base),
        "link": quote(os.path.relpath(report, folder).replace(os.sep, "/")) if report.is_file() else "",
        "status": done.status,
        "kind": "released" if done.status == "released" else "wrong",
        "plant": done.plant,
        "controller": done.controller,
        "said": lines[0] if lines else "",
        "seconds": f"{done.seconds:.1f} s" if done.seconds else "",
    }


def _short(done: "Done", base: Path) -> str:
    label = Path(done.label)
    return str(label.relative_to(base)) if label.is_absolute() and label.is_relative_to(base) else done.label
