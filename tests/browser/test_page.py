"""The report in a real browser: quiet, right to the cent, usable by keyboard, on any screen."""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path
from typing import Any

import pytest

from pipeline.errors import PublishError
from pipeline.publish import Publication
from pipeline.publish.pdf import print_report
from tests.publish.conftest import COST

MEASURES = ("visits", "revenue", "consumer_surplus", "surplus_lost")
SECTIONS = 13


def shown(page: Any) -> dict[str, tuple[str, ...]]:
    """What the fee tool says: estimate, lower and upper end of each measure."""
    read = "cells => cells.map(c => [c.dataset.measure, c.value, c.dataset.low, c.dataset.high])"
    return {name: tuple(rest) for name, *rest in page.locator(".fee-tool data").evaluate_all(read)}


def tabulated(published: Publication, fee: float) -> dict[str, tuple[str, ...]]:
    table = published.tables["fee_schedule"]
    row = table[table["fee"] == fee].iloc[0]
    return {
        m: tuple(f"{row[f'{m}{end}']:.2f}" for end in ("", "_ci_low", "_ci_high")) for m in MEASURES
    }


def test_slider_by_keyboard_equals_the_schedule_to_the_cent(
    page: Any, published: Publication
) -> None:
    slider = page.locator(".fee-tool [type=range]")
    step = float(slider.get_attribute("step"))
    slider.focus()
    page.keyboard.press("Home")
    at = 0.0
    for fee in published.tables["fee_schedule"]["fee"]:
        while at < fee - 1e-9:
            page.keyboard.press("ArrowRight")
            at += step
        assert float(slider.input_value()) == pytest.approx(fee)
        assert shown(page) == tabulated(published, fee)
    assert slider.get_attribute("aria-valuetext") == "EUR 20.00"


def test_slider_by_mouse_equals_the_schedule_to_the_cent(page: Any, published: Publication) -> None:
    slider = page.locator(".fee-tool [type=range]")
    slider.scroll_into_view_if_needed()
    box = slider.bounding_box()
    middle = box["y"] + box["height"] / 2
    page.mouse.move(box["x"] + box["width"] * 0.6, middle)
    page.mouse.down()
    page.mouse.move(box["x"] + box["width"] + 50, middle, steps=4)
    page.mouse.up()
    assert shown(page) == tabulated(published, 20.0)
    page.mouse.click(box["x"] + 1, middle)
    assert shown(page) == tabulated(published, 0.0)


def test_a_typed_fee_moves_slider_figures_and_charts(page: Any, published: Publication) -> None:
    page.locator(".fee-tool [type=number]").fill("7.5")
    assert shown(page) == tabulated(published, 7.5)
    assert page.locator(".fee-tool [type=range]").input_value() == "7.5"
    assert page.locator(".fee-tool output").inner_text() == "EUR 7.50"
    marks = page.locator(".fee-mark").evaluate_all("m => m.map(x => +x.getAttribute('x1'))")
    assert marks == [pytest.approx(52 + (306 - 52) * 7.5 / 20)] * 3


def test_slider_answers_within_a_tenth_of_a_second(page: Any) -> None:
    time = page.evaluate(
        """() => {
          const slider = document.querySelector('.fee-tool [type=range]');
          const start = performance.now();
          for (let i = 0; i < 20; i += 1) {
            slider.value = i;
            slider.dispatchEvent(new Event('input'));
          }
          document.body.getBoundingClientRect();
          return (performance.now() - start) / 20;
        }"""
    )
    assert time < 100


def test_map_switches_measures_by_keyboard(page: Any) -> None:
    radios = page.locator("[data-map] [type=radio]")
    names = radios.evaluate_all("r => r.map(x => x.value)")
    assert names == ["visits_per_1000", "travel_cost", "annual_surplus", "sampled_visits"]
    colours = "u => u.map(x => x.getAttribute('class'))"
    zones = page.locator(".zones.shapes > use:not(.over)")
    before = zones.evaluate_all(colours)
    radios.first.focus()
    page.keyboard.press("ArrowRight")
    assert zones.evaluate_all(colours) != before
    assert page.locator(".legend:visible b").inner_text().startswith("Travel cost, EUR")
    assert page.locator(".map > title").evaluate("t => t.textContent").startswith("Travel cost")
    cheapest = list(COST).index("005")
    assert zones.evaluate_all(colours)[cheapest] == "c0"


def test_hover_and_keyboard_give_the_zone_s_row(page: Any) -> None:
    row = page.locator(".zone-row")
    page.locator(".picker select").select_option(label="Parish 005 & Co")
    words = row.inner_text()
    assert "Travel cost\n3.00" in words
    assert "People\n1,000" in words
    box = page.locator(".zones.shapes > use:not(.over)").nth(list(COST).index("007")).bounding_box()
    page.locator(".map").scroll_into_view_if_needed()
    box = page.locator(".zones.shapes > use:not(.over)").nth(list(COST).index("007")).bounding_box()
    page.mouse.move(box["x"] + box["width"] / 3, box["y"] + box["height"] / 3)
    assert "Travel cost\n12.00" in row.inner_text()
    assert page.locator(".pick").get_attribute("href") == "#z6"


def test_a_screen_of_320_px_needs_no_sideways_scrolling(page: Any) -> None:
    """WCAG 2.2, 1.4.10 (Reflow): 320 CSS px; tables scroll within themselves."""
    page.set_viewport_size({"width": 320, "height": 640})
    assert page.evaluate("document.documentElement.scrollWidth") <= 320


@pytest.mark.parametrize("width", [1280, 360])
def test_no_two_texts_of_a_chart_overlap(page: Any, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 800})
    overlaps = page.evaluate(
        """() => Array.from(document.querySelectorAll('.chart')).flatMap((chart) => {
          const boxes = Array.from(chart.querySelectorAll('text'))
            .map((t) => [t.textContent, t.getBoundingClientRect()]);
          return boxes.flatMap(([a, p], i) => boxes.slice(i + 1)
            .filter(([, q]) => p.left < q.right && q.left < p.right
              && p.top < q.bottom - 3 && q.top < p.bottom - 3)
            .map(([b]) => `${a} | ${b}`));
        })"""
    )
    assert overlaps == []


def test_without_script_the_page_still_says_everything(browser: Any, report: Path) -> None:
    context = browser.new_context(java_script_enabled=False)
    page = context.new_page()
    page.goto(report.as_uri())
    assert page.locator(".fee-tool, .map-tool").evaluate_all("t => t.every(x => x.hidden)")
    assert page.locator("main table").count() > 8
    context.close()


@pytest.mark.parametrize(("paper", "box"), [("A4", "595 842"), ("letter", "612 792")])
def test_print_has_every_section_and_is_tagged(
    page: Any, report: Path, tmp_path: Path, paper: str, box: str
) -> None:
    path = tmp_path / "report.pdf"
    print_report(report, path, paper=paper)
    content = path.read_bytes()
    boxes = re.findall(rb"/MediaBox\s*\[\s*0 0 ([\d.]+) ([\d.]+)", content)
    assert len(boxes) >= 5
    assert {" ".join(f"{float(side):.0f}" for side in sides) for sides in boxes} == {box}
    assert b"/StructTreeRoot" in content
    titles = page.locator("h2").all_inner_texts()
    assert len(titles) == SECTIONS
    if shutil.which("pdftotext") is None:
        pytest.skip("the text needs Debian's package poppler-utils: apt-get install poppler-utils")
    command = ("pdftotext", str(path), "-")
    text = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    # Once in the contents and once over the section, and never alone at the foot of a page.
    assert [title for title in titles if text.count(title) < 2] == []
    feet = [leaf.strip().splitlines()[-1] for leaf in text.split("\f") if leaf.strip()]
    assert set(feet) & set(titles) == set()
    # The folded table of zones is unfolded on paper.
    assert "Parish 007" in text


def test_an_unknown_paper_is_refused(report: Path, tmp_path: Path) -> None:
    with pytest.raises(PublishError, match="paper 'A5' is not known; choose from A4, letter"):
        print_report(report, tmp_path / "report.pdf", paper="A5")


def test_the_contents_lead_to_every_section(page: Any) -> None:
    links = page.locator(".contents a").evaluate_all("a => a.map(x => x.getAttribute('href'))")
    sections = page.locator("main > section").evaluate_all("s => s.map(x => '#' + x.id)")
    assert links == sections
    page.locator(".contents a").last.press("Enter")
    assert page.evaluate("location.hash") == sections[-1]


def test_a_phone_shows_assumptions_as_cards_that_name_their_cells(page: Any) -> None:
    page.set_viewport_size({"width": 360, "height": 800})
    cells = page.locator("#assumed table td:not(:empty)")
    labels = cells.evaluate_all("c => c.map(x => getComputedStyle(x, '::before').content)")
    assert set(labels) == {'"Value"', '"Unit"', '"Usual value"', '"Set by"'}
    regions = page.locator("#assumed .wide")
    assert regions.evaluate_all("r => r.every(x => x.scrollWidth <= x.clientWidth)")


def test_every_control_and_table_is_reached_by_tab(page: Any) -> None:
    page.evaluate("document.querySelectorAll('details').forEach((d) => { d.open = true; })")
    wanted = page.locator("a[href], summary, select, input, [tabindex='0']").count()
    seen = set()
    for _ in range(wanted + 5):
        page.keyboard.press("Tab")
        seen.add(page.evaluate("document.activeElement.outerHTML.slice(0, 120)"))
    for name in ("skip", 'type="range"', 'type="radio"', "<select", "<summary", 'class="wide"'):
        assert any(name in element for element in seen), name
