"""A picture as SVG: text stays text, the same bytes each time, colours follow the page, names do nothing."""

import re
import subprocess
import sys
import warnings
from xml.etree import ElementTree as Tree

import pytest
from gainwright.io.figures.headroom_bars import Headroom, headroom_bars
from gainwright.io.figures.log_and_fit import log_and_fit
from gainwright.io.figures.look import PALETTE
from gainwright.io.figures.svg import inline_svg, png_bytes, svg_file

HOSTILE = ["<script>alert(1)</script>", "$x_1$", "$\\frac{1}", "a & b", "温度 ☂", "a\x00b\x1b[31mc\u202ed", "\\$"]


def one_bar(name: str) -> object:
    return headroom_bars([Headroom(name, "command", "V", 0.0, 5.0, 10.0)])


def words_in(svg: str) -> list[str]:
    """Texts of all text elements, read by an XML parser."""
    return ["".join(each.itertext()).strip() for each in Tree.fromstring(svg).iter("{http://www.w3.org/2000/svg}text")]


@pytest.mark.parametrize(
    ("name", "shown"),
    [
        ("<script>alert(1)</script>", "<script>alert(1)</script>"),
        ("$x_1$", "$x_1$"),
        ("$\\frac{1}", "$\\frac{1}"),
        ("a & b", "a & b"),
        ("a\x00b\x1b[31mc\u202ed", "ab[31mcd"),
        ("--><svg>", "--><svg>"),
        ("温度 ☂", "温度 ☂"),
        ("#1f6fb2", "#1f6fb2"),
    ],
)
def test_a_name_from_a_log_is_shown_letter_by_letter_and_is_no_markup(name, shown):
    """The name is one text and no element; mathematics signs are letters; control signs are left out."""
    svg = inline_svg(one_bar(name), "bars", name)
    assert shown in words_in(svg)
    kinds = {each.tag.split("}")[1] for each in Tree.fromstring(svg).iter()}
    assert kinds <= {"svg", "title", "g", "path", "text", "tspan", "defs", "clipPath", "rect", "use", "pattern"}


def test_a_picture_of_names_in_any_script_raises_no_warning():
    """Fonts that lack a sign are no matter: the viewer's font is used in the end."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        for name in HOSTILE:
            inline_svg(one_bar(name), "bars", name)
            png_bytes(one_bar(name), 40)


def test_the_same_values_give_the_same_bytes_and_no_date(made):
    """Two drawings of one record are equal, and neither carries a date or an author."""
    texts = [
        inline_svg(log_and_fit(made.fit.runs[0], command_unit="V", response_unit="mm"), "log", "log") for _ in range(2)
    ]
    assert texts[0] == texts[1]
    assert "metadata" not in texts[0]
    assert not re.search(r"\b20\d\d-\d\d-\d\d", texts[0])


def test_colours_are_variables_of_the_page_with_the_light_one_to_fall_back_on(made):
    """No style in the picture has a bare colour of the palette."""
    svg = inline_svg(log_and_fit(made.fit.runs[0], command_unit="V", response_unit="mm"), "log", "log")
    bare = re.sub(r"var\(--\w+,#[0-9a-f]{6}\)", "", svg)
    assert not re.search(r"#[0-9a-f]{6}\b", " ".join(re.findall(r'style="[^"]*"', bare)))
    assert f"var(--response,{PALETTE['response']['light']})" in svg


def test_pictures_of_one_page_share_no_id(made):
    """Clip paths and marks of one picture never catch those of another."""
    figure = log_and_fit(made.fit.runs[0], command_unit="V", response_unit="mm")
    ids = [set(re.findall(r'\bid="([^"]+)"', inline_svg(figure, name, name))) for name in ("log-0", "log-1")]
    assert ids[0]
    assert not ids[0] & ids[1]


def test_every_reference_inside_a_picture_finds_its_target(made):
    """url(#...) and href="#..." point to ids that exist, and to nothing outside."""
    svg = inline_svg(log_and_fit(made.fit.runs[0], command_unit="V", response_unit="mm"), "log", "log")
    ids = set(re.findall(r'\bid="([^"]+)"', svg))
    asked = re.findall(r"url\(([^)]*)\)", svg) + re.findall(r'href="([^"]*)"', svg)
    assert asked
    assert {each.strip("'\"").removeprefix("#") for each in asked} <= ids


def test_a_picture_file_is_xml_with_its_own_light_and_dark_ground():
    """Both grounds and all roles are defined in the file itself."""
    text = svg_file(one_bar("command highest"), "bars", "bars")
    Tree.fromstring(text.encode())
    assert "prefers-color-scheme:dark" in text
    assert all(f"--{role}:{pair[ground]}" in text for role, pair in PALETTE.items() for ground in ("light", "dark"))


def test_a_png_is_a_png():
    """The eight bytes that every PNG begins with (PNG specification, section 5.2)."""
    assert png_bytes(one_bar("x"), 40).startswith(b"\x89PNG\r\n\x1a\n")


def test_importing_the_pictures_loads_no_drawing_library_and_drawing_loads_no_global_state():
    """matplotlib comes with the first picture only, and pyplot never."""
    code = (
        "import sys, gainwright.io.figures.step, gainwright.io.figures.locus, gainwright.io.figures.svg as svg\n"
        "from gainwright.io.figures.headroom_bars import headroom_bars\n"
        "assert 'matplotlib' not in sys.modules\n"
        "svg.inline_svg(headroom_bars([]), 'a', 'a')\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    done = subprocess.run([sys.executable, "-P", "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
