"""The report: one file that fetches nothing, says the verdict first, escapes names, and stands without its parts."""

import base64
import hashlib
import re
from dataclasses import replace
from html.parser import HTMLParser

import numpy as np
import pytest
from gainwright.ident.law import Law
from gainwright.io.report.page import law_text, report_html

OWN_SCRIPTS = [{"type": "application/json", "id": "moving-data"}, {}]
VOID = {"meta", "br", "link", "img", "hr", "input"}


class Reader(HTMLParser):
    """Collects elements, attributes and texts, and checks that elements close in order."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.open, self.elements, self.texts = [], [], []
        self.feed(page)
        assert not self.open, f"left open: {self.open}"

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if self.open and self.open[-1] not in ("style", "script"):
            self.texts.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", " ".join(self.texts))


@pytest.fixture(scope="module")
def released(made):
    return report_html(made)


def test_the_page_fetches_nothing_and_runs_only_its_own_script(released):
    """No element or style that loads: no link, image, frame, import or url to outside; one script, by its hash."""
    page = Reader(released)
    assert not {tag for tag, _ in page.elements} & {"link", "img", "iframe", "object", "embed", "base"}
    assert [attributes for tag, attributes in page.elements if tag == "script"] == OWN_SCRIPTS
    text = re.search(r"<script>(.*?)</script>", released, re.DOTALL)[1]
    digest = base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()
    policy = next(each["content"] for tag, each in page.elements if each.get("http-equiv"))
    assert policy == f"default-src 'none'; style-src 'unsafe-inline'; img-src data:; script-src 'sha256-{digest}'"
    for _, attributes in page.elements:
        for name in ("src", "href", "xlink:href", "action", "data", "srcset"):
            assert attributes.get(name, "#").startswith("#")
    assert "@import" not in released
    assert all(target.startswith("#") for target in re.findall(r"url\(['\"]?([^)'\"]*)", released))
    without_names = re.sub(r'xmlns(:xlink)?="[^"]*"', "", released)
    assert "http://" not in without_names
    assert "https://" not in without_names


def test_the_page_is_well_formed_and_no_id_comes_twice(released):
    """Elements close in order; each id is unique, so that no picture takes another's marks."""
    ids = [attributes["id"] for _, attributes in Reader(released).elements if "id" in attributes]
    assert ids
    assert len(ids) == len(set(ids))


def test_it_reads_as_an_engineer_asks(released):
    """May I, the gains, what to expect, headroom, cautions; then how we know."""
    headings = re.findall(r'<h2><span class="no">(\d+)</span>([^<]*)</h2>', released)
    assert [int(number) for number, _ in headings] == list(range(1, 13))
    assert [text for _, text in headings] == [
        "May I use these gains?",
        "The gains to type in",
        "What to expect",
        "Headroom to the hardware limits",
        "First power-up: the gain ladder",
        "Cautions",
        "The logs",
        "The plant and how its structure was chosen",
        "The locus and the magnitude condition",
        "The margins",
        "The held-out run",
        "Where this comes from",
    ]


def test_a_released_page_says_so_with_gains_units_forms_and_the_law(released):
    """The numbers of the made-up job: P = 0.13 V/mm, I = 0.21 V/(mm s), Ti = P/I = 0.6190476 s (by hand)."""
    text = Reader(released).text
    for said in (
        "RELEASED.", "0.13 V/mm", "0.21 V/(mm s)", "integral time Ti", "0.6190476 s",
        "This form does not exist for these gains: PI is no lead or lag.", "Further forms", "update interval", "0.02 s",
        "lowest -13 V, highest 7 V, rate 200 V/s",
        "1200 plausible plants were checked", "98.1 % meet all requirements together (95 % asked for)",
    ):  # fmt: skip
        assert said in text, said
    assert "HELD" not in text


def test_a_held_page_gives_the_reasons_first_and_calls_the_gains_candidates(make_outcome):
    """Nobody who skims it types the gains in."""
    text = Reader(report_html(make_outcome(status="held", reasons=("the sensor clipped for 0.4 s",)))).text
    assert "RELEASED" not in text
    assert "The gains to type in" not in text
    assert text.index("the sensor clipped for 0.4 s") < text.index("The candidate gains, for study only")


def test_a_requirement_that_fails_and_a_value_that_never_comes_are_said(make_outcome, made):
    """None is "never"; an endless margin is an endless margin; NOT MET stands out."""
    judged = list(made.design.judged)
    judged[1] = replace(judged[1], predicted=None, low=None, high=None, met=False)
    judged[4] = replace(judged[4], predicted=float("inf"), low=9.0, high=float("inf"))
    text = Reader(report_html(make_outcome(design=replace(made.design, judged=tuple(judged))))).text
    assert re.search(r"settling time into ±2 % at most 1.6 s never never NOT MET", text)
    assert re.search(r"gain margin at least 6 dB ∞ dB 9 to ∞ dB met", text)


def test_the_working_multiplies_to_one_over_the_loop_gain(released):
    """leading * zeros * dead time * hold / poles, read back from the page, times K is 1 within the printed digits."""
    table = released[released.index("Working of the magnitude condition") :]
    rows = re.findall(r"<tr[^>]*>(.*?)</tr>", table[: table.index("</table>")])
    cells = [re.findall(r"<td[^>]*>([^<]*)</td>", row) for row in rows]
    product, gain = 1.0, 0.0
    for row in filter(None, cells):
        size = float(row[2].split()[0])
        if row[3] == "times":
            product *= size
        elif row[3] == "divided by":
            product /= size
        elif row[0].startswith("K"):
            gain = size
    assert gain == pytest.approx(0.13)
    assert product * gain == pytest.approx(1.0, abs=2e-5)


def test_each_picture_tells_how_to_read_it_and_has_a_name_for_a_screen_reader(released):
    """Eight kinds of picture: step, ribbon, headroom, ladder, log, locus, margins, held-out."""
    page = Reader(released)
    pictures = [attributes for tag, attributes in page.elements if tag == "svg"]
    assert len(pictures) == 8
    assert all(attributes["role"] == "img" and len(attributes["aria-label"]) > 15 for attributes in pictures)
    assert len(re.findall(r"<figcaption>[^<]*How to read (?:it|them):", released)) == 8


HOSTILE = "<script>alert(1)</script>"


def test_names_from_rig_file_and_logs_do_nothing(make_outcome):
    """Rig, channel, file, reason, caution: each shown letter by letter, none is an element or an attribute."""
    page = report_html(
        make_outcome(
            name=HOSTILE, source=HOSTILE, files=(f'{HOSTILE}.csv', '" onload="alert(1)'), cautions=(HOSTILE,),
            status="held", reasons=("$x_1$ </style><img src=x onerror=alert(1)>",),
        )
    )  # fmt: skip
    read = Reader(page)
    assert "img" not in {tag for tag, _ in read.elements}
    assert [attributes for tag, attributes in read.elements if tag == "script"] == OWN_SCRIPTS
    assert not any(name.startswith("on") for _, attributes in read.elements for name in attributes)
    assert HOSTILE in read.text
    assert "$x_1$ </style>" in read.text
    assert '" onload="alert(1)' in read.text


def test_the_same_outcome_gives_the_same_page(made, released):
    """Byte for byte, so that a report can be kept under version control."""
    assert report_html(made) == released


def test_a_page_of_a_hundred_thousand_samples_stays_small(make_outcome):
    """2.5 MB at the most (issue 7); min and max of each stretch are drawn, not each sample."""
    page = report_html(make_outcome(interval=1e-4))
    assert len(page.encode()) < 900_000


def test_a_job_without_a_design_or_a_held_out_run_still_makes_a_page(make_outcome):
    """Held before there was a controller, and before anything could be compared."""
    text = Reader(report_html(make_outcome(design=None, closing=(), status="held", reasons=("no run agrees",)))).text
    assert "no controller was found that could be judged" in text
    assert "There is none: nothing checks the prediction" in text
    assert "no run agrees" in text


def test_a_job_with_a_known_plant_and_no_fit_still_makes_a_page(make_outcome):
    """[plant] in place of fit runs: no fit, no logs of it."""
    assert "What to expect" in report_html(make_outcome(fit=None))


def test_many_fitted_logs_are_named_and_the_first_few_drawn(make_outcome, made):
    """Seven records: four pictures, three names."""
    runs = tuple(replace(made.fit.runs[0], label=f"run_{place}.csv") for place in range(7))
    page = report_html(make_outcome(fit=replace(made.fit, runs=runs)))
    assert "Fitted as well, and not drawn here: run_4.csv, run_5.csv and run_6.csv." in page
    assert page.count("<svg") == 11


def test_a_held_out_run_that_cannot_be_compared_is_said_without_numbers(make_outcome, made):
    """A record that never moves has no misfit, and no prediction to draw."""
    nan = float("nan")
    still = replace(
        made.closing[0], misfit=nan, noise_floor=nan, coverage_95=nan, verdict="not comparable",
        why="the command rests", predicted=made.closing[0].predicted * nan,
    )  # fmt: skip
    text = Reader(report_html(make_outcome(closing=(still,)))).text
    assert "run_2.csv: not comparable the command rests No misfit can be given." in text
    assert "nan" not in text.split()


def test_light_and_dark_and_print_are_provided_for(released):
    """Both palettes are in the page; paper is always light."""
    assert "@media screen and (prefers-color-scheme: dark)" in released
    assert "--response:#1f6fb2" in released
    assert "--response:#7cc4ff" in released
    assert "@media print" in released


def test_the_law_is_written_out_with_its_memory():
    """From the contract: v = r part - y part + sum (memory - command) u - sum memory v, by hand."""
    law = Law(0.1, (1.0, -1.5, 0.5), (2.0, 1.0), (3.0, -1.0), (1.0, -0.5))
    assert law_text(law).splitlines() == [
        "v[k] = 2 r[k] + 1 r[k-1]",
        "       - 3 y[k] + 1 y[k-1]",
        "       + 1 u[k-1] - 0.5 u[k-2]",
        "       + 0.5 v[k-1]",
        "u[k] = v[k] limited by the clamp",
    ]


def test_continuous_and_sampled_pole_stand_side_by_side_with_their_distance(make_outcome):
    """Both in 1/s, and how far apart in per cent; what else lies on the same lines is folded below."""
    outcome = make_outcome()
    selection = outcome.design.selection
    text = Reader(report_html(outcome)).text
    apart = 100.0 * abs(selection.sampled_pole - selection.pole) / abs(selection.pole)
    assert "The exact pole of the sampled loop, ln z/T, stands at" in text
    assert f"{apart:.2g} % from it" in text
    assert "Everything the locus offers on the same lines" in text


def test_the_moving_sheet_says_that_a_sticking_actuator_is_run(made):
    """Only where one was found: then the page's plant has its band and how far short it rests."""
    words = "The actuator that sticks is run too: what hunts here hunts on the rig"
    text = report_html(made)
    assert words not in Reader(text).text
    assert '"valve":null' in text
    plausible = made.fit.plausible
    valves = np.tile([0.2, 0.1, 0.0], (len(plausible.plants), 1))
    text = report_html(replace(made, fit=replace(made.fit, plausible=replace(plausible, valves=valves))))
    assert words in Reader(text).text
    assert '"valve":{"band":0.2,"short":0.1,"above":0.0}' in text

