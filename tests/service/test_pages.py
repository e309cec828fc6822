from __future__ import annotations

import html
import re
import shutil
import subprocess
import xml.etree.ElementTree as ElementTree
from html.parser import HTMLParser

import pytest

from schemas.answer import Answer
from schemas.examples import EXAMPLES
from schemas.page import Curve, Level, Page, Plot, Section, told
from schemas.table import Table
from service import drawing, pages

SVG = "{http://www.w3.org/2000/svg}"


def plot(**changes):
    table = Table({"temperature": [300.0, 400.0], "conversion": [0.9, None]}, {"temperature": "K"})
    members = {
        "title": "Conversion against temperature",
        "x_label": "temperature [K]",
        "y_label": "conversion",
        "curves": (Curve("at 1 bar", [300.0, 350.0, 400.0], [0.9, 0.7, 0.4]),),
        "says": "The conversion falls from 0.9 to 0.4.",
        "table": table,
    }
    return Plot(**{**members, **changes})


def words(svg):
    return [element.text for element in ElementTree.fromstring(svg).iter(f"{SVG}text")]  # noqa: S314


def test_a_plot_tells_its_axes_in_text():
    said = words(drawing.svg(plot()))
    assert "temperature [K]" in said
    assert "conversion" in said


def test_a_plot_is_the_same_bytes_each_time():
    assert drawing.svg(plot()) == drawing.svg(plot())


def test_curves_are_named_and_told_apart_without_colour():
    curves = tuple(Curve(f"curve {k}", [0.0, 1.0], [k, k + 1.0]) for k in range(5))
    svg = drawing.svg(plot(curves=curves))
    assert {f"curve {k}" for k in range(5)} <= set(words(svg))
    dashes = {
        part.split(";")[0]
        for style in svg.split('style="')
        for part in style.split("stroke-dasharray: ")[1:]
    }
    assert len(dashes) >= 4


@pytest.mark.parametrize("name", ["_hidden", "$x^2$", "<b>&", "ökosüß 水", "a" * 200])
def test_a_caller_s_names_stay_what_they_are(name):
    curves = (Curve(name, [0.0, 1.0], [0.0, 1.0]), Curve("other", [0.0, 1.0], [1.0, 0.0]))
    said = words(drawing.svg(plot(curves=curves)))
    assert name in [(word or "").lstrip("\u200b") for word in said]


def test_a_gap_is_a_gap_and_a_lone_value_is_shown():
    whole = drawing.svg(plot(curves=(Curve("", [0.0, 1.0, 2.0], [1.0, 2.0, 3.0]),)))
    lone = drawing.svg(plot(curves=(Curve("", [0.0, 1.0, 2.0], [1.0, None, 3.0]),)))
    # Markers are drawn where lines cannot be.
    assert lone.count("<use") > whole.count("<use")
    drawing.svg(plot(curves=(Curve("", [None], [None]),)))


def test_times_bands_limits_and_flags_are_drawn():
    hours = [1769900400.0 + 3600 * k for k in range(48)]
    known = Curve("conversion", hours, [0.7] * 48, low=[0.6] * 48, high=[0.8] * 48)
    flagged = Curve("beyond a limit", hours[:1], [0.7], drawn_as="flags")
    shown = plot(
        curves=(known, flagged),
        levels=(Level("limit, low", 0.65),),
        time_zone="Europe/Helsinki",
    )
    said = words(drawing.svg(shown))
    assert {"conversion", "beyond a limit", "limit, low"} <= set(said)
    # 2026-02-01 01:00 in Helsinki: the day that begins within the picture is the second.
    assert any("Feb" in (word or "") for word in said)
    plain = plot(curves=(Curve("conversion", hours, [0.7] * 48), flagged), time_zone="UTC")
    assert drawing.svg(shown).count("<path") > drawing.svg(plain).count("<path")


def test_a_page_that_stands_for_a_verdict_says_so_in_words():
    answer = Answer({}, [], [], "method", "data")
    bare = Page("A bed", "All limits held.", ())
    said = {"method": "m", "data": "d", "release": "0", "digest": "sha256:0"}
    assert "Fine." not in pages.answer_page(answer, bare, said)
    for standing, word in (("fine", "Fine."), ("attention", "To act on."), ("bad", "Bad data.")):
        section = Section("Exceptions", "None.", Table({"what": ["<b>"]}, {}))
        page = Page("A bed", "All limits held.", (), standing=standing, leading=(section,))
        shown = pages.answer_page(answer, page, said)
        assert word in shown
        assert "&lt;b&gt;" in shown
        assert shown.index("Exceptions") < shown.index("What was assumed")


class Reader(HTMLParser):
    def __init__(self):
        super().__init__()
        self.images, self.text, self.tags, self.loads = [], [], [], []

    def handle_starttag(self, tag, attrs):
        attrs = dict(attrs)
        self.tags.append(tag)
        if tag == "img":
            self.images.append(attrs)
        self.loads += [attrs[name] for name in ("src", "href") if name in attrs]

    def handle_data(self, data):
        self.text.append(data)


def rendered(page, notes=(), assumed=()):
    answer = Answer({}, list(notes), list(assumed), "method", "data")
    provenance = answer.document("1", "sha256:0", "body")["provenance"]
    return pages.answer_page(answer, page, provenance)


def test_a_page_holds_everything_itself():
    note = {"code": "x", "detail": "hot <inside>", "severity": "caution", "pointer": "/feed"}
    page = rendered(
        Page("Equilibrium", "It is <fine>.", (("conversion", None),), (plot(),)), [note], [note]
    )
    read = Reader()
    read.feed(page)
    assert "script" not in read.tags
    assert read.loads
    assert all(load.startswith("data:image/svg+xml;base64,") for load in read.loads)
    (image,) = read.images
    assert image["alt"] == "The conversion falls from 0.9 to 0.4."
    text = " ".join(read.text)
    assert "It is <fine>." in text
    assert "hot <inside>" in text
    assert "Caution:" in text
    assert "not known" in text
    assert "Follow local codes" in text
    assert "<fine>" not in page
    assert html.escape("<fine>") in page


@pytest.mark.parametrize(
    ("number", "words"),
    [
        ({"value": 0.739999, "unit": "1", "u": 0.002275}, "0.7400 ± 0.0023"),
        ({"value": 1234.5678, "unit": "kmol/h", "u": 12.4}, "1235 ± 12 kmol/h"),
        ({"value": 1234567.0, "unit": "Pa", "u": 4321.0}, "(1.2346 ± 0.0043)e+6 Pa"),
        ({"value": 12345.6, "unit": "mol", "u": 321.0}, "12350 ± 320 mol"),
        ({"value": 3.2e-7, "unit": "1", "u": 4.1e-8}, "(3.20 ± 0.41)e-7"),
        ({"value": 2.1436249, "unit": "m3"}, "2.1436 m3"),
        ({"value": 0.0, "unit": "K", "u": 0.0}, "0 K"),
        (None, "not known"),
    ],
)
def test_numbers_are_told_to_what_is_known_of_them(number, words):
    assert told(number) == words


def test_an_interval_is_told_with_its_coverage():
    number = {"value": 1.0, "unit": "1", "interval": [0.9, 1.1], "coverage": 0.95}
    assert pages.interval(number) == "0.9 to 1.1 (95 %)"
    assert pages.interval({"value": 1.0, "unit": "1"}) == ""


EQUILIBRIA = [e for e in EXAMPLES if e.operation == "equilibrium" and e.status == 200]


@pytest.fixture(scope="module")
def equilibrium_pages(app):
    client = app.test_client()
    return {
        e.name: client.post("/v1/equilibrium", json=e.request, headers={"Accept": "text/html"})
        for e in EQUILIBRIA
    }


@pytest.mark.parametrize("name", [e.name for e in EQUILIBRIA])
def test_the_page_of_an_equilibrium(client, equilibrium_pages, name):
    example = next(e for e in EQUILIBRIA if e.name == name)
    response = equilibrium_pages[name]
    assert response.mimetype == "text/html"
    assert response.headers["Content-Security-Policy"] == pages.POLICY
    read = Reader()
    read.feed(response.get_data(as_text=True))
    text = " ".join(" ".join(read.text).split())
    answer = client.post("/v1/equilibrium", json=example.request).get_json()
    found = answer["result"]
    conversion = 100 * found["conversion"]["value"]
    assert f"the equilibrium conversion of {found['key']} is {conversion:.4g} %" in text
    for note in (*answer["notes"], *answer["assumed"]):
        assert note["detail"] in text
    for substance, said in found["outlet"]["species"].items():
        assert substance in text
        assert f"{said['flow']['value']:.5g}" in text
    plots = 0
    if "sweep" in found:
        plots = 2 + ("condensed" in found)
    assert len(read.images) == plots
    assert all(image["alt"].endswith(".") for image in read.images)
    if "approach" in found:
        approach = next(iter(found["approach"].values()))["approach"]
        assert f"The measured outlet is {told(approach)} short of the equilibrium" in text


def test_the_page_tells_points_without_an_answer(client):
    lime = {
        "species": {"CaCO3": {"phase": "solid"}, "CaO": {"phase": "solid"}},
        "reactions": [{"equation": "CaCO3 <=> CaO + CO2", "equilibrium_constant": "1 bar"}],
        "key": "CaCO3",
        "feed": {
            "phase": "gas",
            "temperature": "1150 K",
            "pressure": "0.1 bar",
            "flows": {"CaCO3": "1 mol/s", "CaO": "3 mol/s", "CO2": "1 mol/s"},
        },
        "sweep": {"over": "pressure", "from": "2 bar", "to": "4 bar", "points": 3},
    }
    page = client.post("/v1/equilibrium", json=lime, headers={"Accept": "text/html"})
    assert page.status_code == 200
    assert "is not known anywhere on the sweep" in page.get_data(as_text=True)


CHROMIUM = shutil.which("chromium")


@pytest.mark.skipif(CHROMIUM is None, reason="no browser is installed")
def test_a_browser_prints_the_page_on_a4(equilibrium_pages, tmp_path):
    page = tmp_path / "page.html"
    page.write_bytes(equilibrium_pages["carbon-beside-carbon-monoxide"].get_data())
    shown = subprocess.run(
        [
            CHROMIUM,
            "--headless",
            "--no-sandbox",
            "--disable-gpu",
            "--disable-quic",
            "--no-first-run",
            "--disable-background-networking",
            "--disable-component-update",
            "--disable-sync",
            f"--user-data-dir={tmp_path / 'profile'}",
            "--no-pdf-header-footer",
            f"--print-to-pdf={tmp_path / 'page.pdf'}",
            page.as_uri(),
        ],
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert shown.returncode == 0
    printed = (tmp_path / "page.pdf").read_bytes()
    assert printed.startswith(b"%PDF-")
    # Two or three sheets of A4, upright.
    boxes = re.findall(rb"/MediaBox ?\[0 0 ([0-9.]+) ([0-9.]+)\]", printed)
    assert 1 <= len(boxes) <= 4
    assert all(594 < float(w) < 597 and 841 < float(h) < 843 for w, h in boxes)
