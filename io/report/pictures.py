"""The report's pictures, ready to stand in a page."""

from ...design.designed import Design
from ...ident.fitted import Fit
from ..figures import gallery
from ..figures.svg import inline_svg
from ..outcome import Outcome

MOST_LOGS = 4


def _inline(picture: gallery.Picture | None) -> str:
    return "" if picture is None else inline_svg(picture.figure, picture.name, picture.title)


def step_picture(outcome: Outcome, design: Design) -> str:
    """The predicted test step, or nothing where no test step was asked for."""
    return _inline(gallery.step_picture(outcome, design))


def ribbon_picture(design: Design) -> str:
    """The gain ribbon."""
    return _inline(gallery.ribbon_picture(design))


def headroom_picture(outcome: Outcome) -> str:
    """The headroom bars."""
    return _inline(gallery.headroom_picture(outcome))


def log_pictures(outcome: Outcome) -> tuple[tuple[str, str], ...]:
    """Label and picture of the first fitted records."""
    fit = outcome.fit
    if fit is None:
        return ()
    shown = range(min(len(fit.runs), MOST_LOGS))
    return tuple((fit.runs[place].label, _inline(gallery.log_picture(outcome, fit, place))) for place in shown)


def table_pictures(outcome: Outcome) -> tuple[tuple[str, str], ...]:
    """Label and picture of each fitted frequency table."""
    fit = outcome.fit
    if fit is None:
        return ()
    pictures = (gallery.table_picture(outcome, fit, table, f"table-{i}") for i, table in enumerate(fit.tables))
    return tuple((table.label, _inline(picture)) for table, picture in zip(fit.tables, pictures, strict=True))


def held_out_pictures(outcome: Outcome) -> tuple[str, ...]:
    """A picture for each held-out record, empty where it has no prediction."""
    return tuple(_inline(gallery.held_out_picture(outcome, place)) for place in range(len(outcome.closing)))


def locus_picture(outcome: Outcome, fit: Fit, design: Design) -> str:
    """The locus with the chosen point."""
    return _inline(gallery.locus_picture(outcome, fit, design))


def margins_picture(outcome: Outcome, fit: Fit, design: Design) -> str:
    """The loop over frequency with its margins."""
    return _inline(gallery.margins_picture(outcome, fit, design))
