"""A Figure as inline SVG that follows the page's light or dark ground, or as PNG."""

import io
import re
import warnings
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape, quoteattr

from .look import PALETTE
from .words import one_line

if TYPE_CHECKING:
    from matplotlib.figure import Figure

FONT = "system-ui, sans-serif"
_FAMILY = re.compile(r"(font: (?:[\w.]+ )*?[\d.]+px )[^;\"]+")
_GROUP_ID = re.compile(r'<g id="[a-z_A-Z0-9.]+"(/?)>')
_STYLE = re.compile(r'style="[^"<>]*"')
_COLOUR = re.compile(r"#[0-9a-f]{6}\b")


def inline_svg(figure: "Figure", name: str, title: str) -> str:
    """The picture as one `<svg>` element: text as text, the same bytes each time, colours as variables.

    Parameters
    ----------
    figure : Figure
    name : str
        Distinguishes the ids of several pictures in one page; letters and hyphens.
    title : str
        Read aloud by a screen reader; may hold anything.
    """
    title = one_line(title)
    body = _drawn(figure, name)
    body = body[body.index("<svg") :]
    body = re.sub(r"<metadata>.*?</metadata>", "", body, flags=re.DOTALL)
    body = re.sub(r"<style[^>]*>.*?</style>", "", body, flags=re.DOTALL)
    body = re.sub(r"<!--.*?-->\s*", "", body, flags=re.DOTALL)
    body = _GROUP_ID.sub(r"<g\1>", body)
    body = re.sub(r"<g/>\s*", "", body)
    body = _FAMILY.sub(r"\1var(--picture-font, sans-serif)", body)
    body = _STYLE.sub(lambda found: _COLOUR.sub(_variable, found[0]), body)
    body = re.sub(r"<defs>\s*</defs>\s*", "", body)
    head_end = body.index(">")
    head = _head(body[:head_end], title)
    return f"{head}><title>{escape(title)}</title>{body[head_end + 1 :].rstrip()}"


def svg_file(figure: "Figure", name: str, title: str) -> str:
    """The same picture as a file of its own, on its own ground, light or dark as the viewer prefers."""
    body = inline_svg(figure, name, title)
    style = (
        f"<style>svg{{--picture-font:{FONT};background:var(--paper)}}:root{{{variables('light')}}}"
        f"@media (prefers-color-scheme:dark){{:root{{{variables('dark')}}}}}</style>"
    )
    at = body.index("</title>") + len("</title>")
    return f'<?xml version="1.0" encoding="utf-8"?>\n{body[:at]}{style}{body[at:]}\n'


def png_bytes(figure: "Figure", dpi: float = 160.0) -> bytes:
    """The picture as PNG on light ground."""
    target = io.BytesIO()
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        figure.savefig(target, format="png", dpi=dpi, facecolor=PALETTE["paper"]["light"], metadata={"Software": None})
    return target.getvalue()


def variables(ground: str) -> str:
    """The palette as custom properties of a style sheet, for "light" or "dark" ground."""
    return "".join(f"--{role}:{pair['dark' if ground == 'dark' else 'light']};" for role, pair in PALETTE.items())


def _drawn(figure: "Figure", name: str) -> str:
    import matplotlib as mpl

    target = io.StringIO()
    settings: Any = {"svg.fonttype": "none", "svg.hashsalt": f"gainwright {name}", "path.simplify_threshold": 0.2}
    with mpl.rc_context(settings), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        figure.savefig(target, format="svg", facecolor="none", metadata={"Date": None})
    return target.getvalue()


def _head(head: str, title: str) -> str:
    head = re.sub(r' (?:width|height|version)="[^"]*"', "", head)
    return f'{head} role="img" aria-label={quoteattr(title)} style="stroke-linejoin:round;stroke-linecap:butt"'


def _variable(found: re.Match[str]) -> str:
    role = next((name for name, pair in PALETTE.items() if pair["light"] == found[0]), None)
    return f"var(--{role},{found[0]})" if role else found[0]
