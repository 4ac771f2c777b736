"""The paper sheet: gains, validity, ladder and a line to sign on one page; nothing to type in where they are held."""

import json
import re
import shutil
import subprocess
import zlib
from dataclasses import replace

import numpy as np
import pytest
from gainwright.design.requirements import Requirement
from gainwright.io.report.page import report_html
from gainwright.io.report.paper import paper_of
from gainwright.io.sheet import sheet_bytes, sheet_of
from gainwright.io.validity import validity_of


def paper_part(page: str) -> str:
    """The text of the paper sheet alone, tags taken out."""
    part = re.search(r'<section class="paper".*?</section>', page, re.DOTALL)
    assert part is not None
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", part[0]))


def test_a_released_paper_sheet_has_gains_validity_ladder_and_a_line_to_sign(made) -> None:
    """Everything that is wanted at the rig."""
    text = paper_part(report_html(made))
    for said in (
        "RELEASED",
        "0.13 V/mm",
        "Valid for",
        "setpoint steps up to 20 mm",
        "made 2026-11-03",
        "Rung 0, loop open",
        "approved by (name)",
        "signature",
        "Checked by calculation only",
        "rig file sha256 abababababababab",
    ):
        assert said in text, said
    assert "changed mechanically" in text


def test_a_held_paper_sheet_prints_no_gains(made) -> None:
    """Reasons instead, in place of anything that could be typed in."""
    text = paper_part(report_html(replace(made, status="held", reasons=("no held-out run",))))
    assert "NO GAINS ARE TO BE LOADED" in text
    assert "no held-out run" in text
    assert "V/mm" not in text


def test_validity_is_what_the_fitted_logs_covered(made) -> None:
    """Extremes of the fitted record, not of the held-out one; the fastest is half its sample rate."""
    run = made.records[0].run
    found = validity_of(made)
    assert found.command == (run.command.min(), run.command.max())
    assert found.response == (np.nanmin(run.response), np.nanmax(run.response))
    assert found.fastest == pytest.approx(np.pi / 0.02)
    row = json.loads(sheet_bytes(sheet_of(made)))["validity"]
    assert row["command"] == {"range": [run.command.min(), run.command.max()], "unit": "V"}
    assert row["made"] == "2026-11-03"


def test_dates_of_the_logs_stand_on_it(made) -> None:
    """As the rig file states them."""
    records = tuple(replace(record, spec=replace(record.spec, taken="2026-10-30")) for record in made.records)
    assert "logs of 2026-10-30" in paper_part(report_html(replace(made, records=records)))


def pages_of(pdf: bytes) -> int:
    """Page objects of a PDF file, those in compressed object streams too."""
    whole = pdf
    for stream in re.findall(rb"stream\r?\n(.*?)endstream", pdf, re.DOTALL):
        try:
            whole += zlib.decompress(stream)
        except zlib.error:
            continue
    return len(re.findall(rb"/Type\s*/Page(?![a-zA-Z])", whole))


@pytest.mark.skipif(shutil.which("chromium") is None, reason="no browser to print with")
def test_the_fullest_paper_sheet_fits_on_one_page(made, tmp_path) -> None:
    """Twelve requirements and six limits; the section alone, printed by a browser on its default paper."""
    first = made.design.judged[0]
    names = ("overshoot", "settling_time", "rise_time", "steady_state_error", "ramp_error", "disturbance_peak",
             "disturbance_recovery", "command_noise", "damping_ratio", "gain_margin", "phase_margin",
             "peak_sensitivity")  # fmt: skip
    judged = tuple(replace(first, requirement=Requirement(name, 0.5, "at_most", "s")) for name in names)
    full = replace(made, design=replace(made.design, judged=judged))
    page = report_html(full)
    assert len(paper_of(full)["asked"]) == 12 + len(made.design.limits)
    alone = re.sub(r"<header>.*</main>", "", page, flags=re.DOTALL).replace("break-after: page;", "")
    (tmp_path / "paper.html").write_text(alone, "utf-8")
    subprocess.run(
        ["chromium", "--headless", "--no-sandbox", "--disable-gpu", f"--user-data-dir={tmp_path / 'profile'}",
         f"--print-to-pdf={tmp_path / 'paper.pdf'}", (tmp_path / "paper.html").as_uri()],
        check=True, capture_output=True, timeout=120,
    )  # fmt: skip
    assert pages_of((tmp_path / "paper.pdf").read_bytes()) == 1
