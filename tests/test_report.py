"""The report: what it says, that it asks for nothing, and that no name can do harm."""

from __future__ import annotations

import base64
import hashlib
import json
import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import shapely

from gridcool.planning.ranking import COLUMNS
from gridcool.planning.target import reach_target
from gridcool.planning.worth import PanelCosts
from gridcool.products.report.facts import (
    Assumptions,
    LayerRange,
    Picture,
    ReportFacts,
    Source,
)
from gridcool.products.report.page import render, write_report
from gridcool.products.report.shapes import MOST_POINTS, drawing
from gridcool.products.report.words import facing, headline, number, percent, ranks

HARMFUL = "<script>alert('x')</script>"
NAMES = ["Alpha", HARMFUL, '=cmd("calc")', "مرحبا, عالم", "🌞 & “quotes” 'and' \"more\"", "void"]
PIXEL = base64.b64decode(
    "iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAYAAAAfFcSJAAAADUlEQVR42mNk+M9QDwADhgGAWjR9awAAAABJRU5ErkJggg=="
)
ASSUMPTIONS = Assumptions(
    ranked_by="suitability",
    top=2,
    common_share=0.5,
    correlation_km=500,
    ground_cover=0.3,
    lifetime_years=25,
    reflectance=0.89,
    irradiance="blend",
    criteria=("rejected flux: worth 0 at 40, 1 at 160; weight 0.6",),
    rules=("too steep: slope above 15",),
)
COSTS = PanelCosts(lifetime_years=25, mass=10, embodied_energy=150, cost_low=14, cost_high=100)


def table() -> pd.DataFrame:
    count = len(NAMES)
    frame = pd.DataFrame({column: np.linspace(100, 50, count) for column in COLUMNS})
    frame["region"] = NAMES
    frame["main_exclusion"] = ["", "too steep", "", "", "", "too steep"]
    frame["rank"] = pd.array([1, 2, 3, 4, 5, pd.NA], "Int64")
    frame["rank_low"] = pd.array([1, 1, 2, 3, 5, pd.NA], "Int64")
    frame["rank_high"] = pd.array([1, 3, 4, 4, 5, pd.NA], "Int64")
    frame["chance_top"] = [1.0, 0.8, 0.2, 0.004, 0.0, np.nan]
    frame["suitability_mean"] = [0.9, 0.8, 0.7, 0.6, 0.5, np.nan]
    frame["rejected_power_tw"] = [0.01, 0.02, 0.03, 0.04, 0.05, np.nan]
    return frame


@pytest.fixture
def facts(tmp_path: Path) -> ReportFacts:
    picture = tmp_path / "map.png"
    picture.write_bytes(PIXEL)
    shapes = [shapely.box(10 * i, 0, 10 * i + 8, 10) for i in range(len(NAMES))]
    return ReportFacts(
        title=f"Invented {HARMFUL}",
        note="Everything here is invented.",
        created="2026-01-01 00:00 UTC",
        version="0",
        grid="somewhere",
        assumptions=ASSUMPTIONS,
        caution="For screening only.",
        references="A 1999; B 2001",
        settings='{"job": "x & <y>"}',
        regions=table(),
        region_shapes=shapes,
        zones=table().head(2).assign(region=["zone 1", "zone 2"]),
        losses=pd.DataFrame(
            [(HARMFUL, "too steep", 12.0, 3.0)],
            columns=["region", "reason", "area_km2", "only_km2"],
        ),
        sensitivity=pd.DataFrame(
            [("weight of slope halved", 0.9, -2, "Alpha", 1)],
            columns=[
                *("change", "rank_correlation", "largest_move"),
                *("region_moved", "top_changes"),
            ],
        ),
        target=reach_target(table(), rejected_power_tw=0.025, panel_km2_per_year=10, costs=COSTS),
        pictures=[Picture("A map", picture, "It shows <nothing>.")],
        layers=[LayerRange("tilt", "best tilt", "degree", 0, 10, 30)],
        sources=[Source("albedo", "albedo.nc", "albedo", "ab" * 32)],
        warnings=["albedo: 3 values are odd."],
    )


class Page(HTMLParser):
    """Collects elements, their attributes and the text."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.text = ""
        self.feed(html)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_data(self, data: str) -> None:
        self.text += data

    def every(self, tag: str) -> list[dict[str, str | None]]:
        return [attributes for name, attributes in self.elements if name == tag]


def test_it_opens_with_the_answer(facts: ReportFacts) -> None:
    html = render(facts)
    text = Page(html).text
    for words in (
        "Where first, and how sure",
        "chances of really being among the best 2 are over 99 % and 80 %",
        'Too close to call: =cmd("calc") comes later',
        "A rejected power of 0.0250 TW is reached",
        "Everything here is invented.",
        "For screening only.",
        "too steep: slope above 15",
        "weight of slope halved",
        "CO₂ over 100 years",
        "albedo: 3 values are odd.",
    ):
        assert words in text, words
    assert html.index("Where first") < html.index("<h2>Maps") < html.index("<h2>The ranking")


def test_nothing_is_asked_for_outside_the_file(facts: ReportFacts) -> None:
    html = render(facts)
    page = Page(html)
    for tag, attributes in page.elements:
        for name in ("src", "href", "action", "data", "poster", "srcset"):
            value = attributes.get(name) or ""
            assert not value or value.startswith(("#", "data:image/png;base64,")), (tag, value)
    assert not re.search(r"https?:|//[a-z]|@import|url\(", html)
    assert not page.every("link")
    assert not page.every("iframe")
    policy = next(m["content"] for m in page.every("meta") if m.get("http-equiv"))
    assert policy is not None
    assert policy.startswith("default-src 'none'")
    # Only the page's own script may run.
    script = re.search(r"<script>(.*?)</script>", html, re.S)
    assert script is not None
    digest = base64.b64encode(hashlib.sha256(script.group(1).encode()).digest()).decode()
    assert f"'sha256-{digest}'" in policy


def test_harmful_names_are_only_text(facts: ReportFacts) -> None:
    html = render(facts)
    assert HARMFUL not in html
    page = Page(html)
    assert len(page.every("script")) == 2
    assert page.text.count(HARMFUL) >= 4
    for name in NAMES:
        assert name in page.text
    # Handlers written into attributes would be refused by the policy; there are none anyway.
    assert not [name for _, each in page.elements for name in each if name.startswith("on")]
    held = re.search(r'<script type="application/json" id="shapes-data">(.*?)</script>', html, re.S)
    assert held is not None
    assert json.loads(held.group(1))["names"] == NAMES


def test_it_can_be_read_by_all(facts: ReportFacts) -> None:
    page = Page(render(facts))
    assert page.every("html")[0]["lang"] == "en"
    assert all(image.get("alt") for image in page.every("img"))
    assert all(head.get("scope") in ("col", "row") for head in page.every("th"))
    assert len(page.every("table")) - 1 <= len(page.every("caption"))
    for tag in ("main", "header", "nav", "footer"):
        assert len(page.every(tag)) == 1
    identifiers = [each["id"] for _, each in page.elements if each.get("id")]
    assert len(identifiers) == len(set(identifiers))
    targets = {str(link["href"])[1:] for link in page.every("a")}
    assert targets <= set(map(str, identifiers))
    assert len(page.every("h1")) == 1


def contrast(first: str, second: str) -> float:
    """WCAG 2 contrast of two colours."""

    def light(colour: str) -> float:
        parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        linear = [p / 12.92 if p <= 0.03928 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    low, high = sorted([light(first), light(second)])
    return (high + 0.05) / (low + 0.05)


def test_text_stands_out() -> None:
    style = (Path(__file__).parents[1] / "gridcool/products/report/report.css").read_text()
    colours = dict(re.findall(r"--(\w+): (#[0-9a-f]{6})", style))
    for ink in ("ink", "soft", "mark"):
        for ground in ("#ffffff", colours["tint"]):
            assert contrast(colours[ink], ground) > 4.5
    assert contrast("#aaaaaa", "#ffffff") < 4.5  # grey on white would be seen


def test_less_to_say_is_no_trouble(facts: ReportFacts) -> None:
    bare = replace(
        facts,
        regions=None,
        region_shapes=(),
        zones=None,
        losses=None,
        sensitivity=None,
        target=None,
        pictures=(),
        layers=(),
        sources=(),
        warnings=(),
        note="",
    )
    assert "No regions were asked for" in render(bare)
    nobody = table().assign(rank=pd.array([pd.NA] * len(NAMES), "Int64"))
    assert "No region has an eligible cell." in render(replace(facts, regions=nobody))
    plain = table().assign(suitability_mean=np.nan)
    flux = replace(
        facts,
        regions=plain,
        zones=None,
        assumptions=replace(ASSUMPTIONS, ranked_by="rejected_flux"),
    )
    assert '<button type="button">Suitability' not in render(flux)


def test_the_same_page_every_time(facts: ReportFacts, tmp_path: Path) -> None:
    write_report(facts, tmp_path / "a.html")
    write_report(facts, tmp_path / "b.html")
    assert (tmp_path / "a.html").read_bytes() == (tmp_path / "b.html").read_bytes()


@pytest.mark.parametrize(
    ("value", "digits", "shown"),
    [
        (0, 3, "0"),
        (123.456, 3, "123"),
        (0.012345, 3, "0.0123"),
        (812844.3, 3, "812\u202f844"),
        (12_345_678, 3, "12.3 million"),
        (1.138e13, 3, "1.14 × 10¹³"),
        (-5.678, 2, "-5.7"),
        (float("nan"), 3, "–"),
        (None, 3, "–"),
    ],
)
def test_numbers(value: Any, digits: int, shown: str) -> None:
    assert number(value, digits) == shown


def test_words() -> None:
    assert percent(0.004) == "under 1 %"
    assert percent(0.996) == "over 99 %"
    assert percent(0.5) == "50 %"
    assert facing(20, 180) == "20° south"
    assert facing(20, 350) == "20° north"
    assert facing(0.2, 90) == "flat"
    assert ranks(2, 5) == "2 to 5"
    assert ranks(2, 2) == "2"
    sure = headline(table().assign(chance_top=0.95), ASSUMPTIONS)
    assert "at least nine in ten" in sure["sure"]


def test_pictures_stay_small() -> None:
    angles = np.linspace(0, 2 * np.pi, 50_000)
    ragged = 5 + np.random.default_rng(1).random(50_000)
    shape = shapely.Polygon(np.column_stack([ragged * np.cos(angles), ragged * np.sin(angles)]))
    found = drawing([shape.buffer(0), shapely.Polygon()])
    assert found is not None
    assert found.paths[1] == ""
    assert found.paths[0].count("L") < MOST_POINTS
    assert drawing([shapely.Polygon()]) is None
    hole = shapely.box(0, 0, 10, 10).difference(shapely.box(2, 2, 8, 8))
    with_hole = drawing([hole])
    assert with_hole is not None
    assert with_hole.paths[0].count("M") == 2
