"""Reports in a real browser without a screen: nothing asked of the network, no complaint, right numbers, printable.

Needs the package playwright (extra ``browser``) and a Chromium; skipped where either is missing.
"""

from __future__ import annotations

import re
import shutil
import subprocess
from collections.abc import Iterator
from pathlib import Path
from typing import Any, NamedTuple

import h5py
import pytest

from shpb.cli.main import main
from shpb.demo.campaign import write_demo

playwright = pytest.importorskip("playwright.sync_api", reason="the package playwright is not installed")

_NAMES = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable")
CHROMIUM = next((found for name in _NAMES if (found := shutil.which(name))), None)
FLAGS = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]
SHOTS = ("W-01", "W-03", "W-04", "W-05")  # the last is rejected

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(CHROMIUM is None, reason=f"there is no browser called {', '.join(_NAMES)}"),
]


@pytest.fixture(scope="module", name="campaign")
def _campaign(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder: Path = tmp_path_factory.mktemp("browser") / "lab #1 & <b>"
    write_demo(folder)
    sheets = [str(folder / "records" / f"{name}.toml") for name in SHOTS]
    main(["reduce", *sheets, "--figure", "none", "--workers", "1", "--results", str(folder / "results")])
    for path in (folder / "quasistatic").glob("H_*"):
        path.unlink()
    main(["merge", str(folder), "--figure", "none", "--laws", "ludwik"])
    assert main(["report", str(folder), "--workers", "1"]) == 0
    return folder


@pytest.fixture(scope="module", name="browser")
def _browser() -> Iterator[Any]:
    with playwright.sync_playwright() as started:
        browser = started.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield browser
        browser.close()


class Opened(NamedTuple):
    """A page, what it asked for and what it complained about."""

    page: Any
    asked: list[str]
    complaints: list[str]


@pytest.fixture(name="opened")
def _opened(browser: Any) -> Iterator[Any]:
    contexts = []

    def open_page(path: Path, *, width: int = 1000, scripts: bool = True) -> Opened:
        context = browser.new_context(
            viewport={"width": width, "height": 900}, java_script_enabled=scripts, offline=True
        )
        contexts.append(context)
        page = context.new_page()
        asked, complaints = [], []
        page.on("request", lambda request: asked.append(request.url))
        page.on("console", lambda message: complaints.append(message.text))
        page.on("pageerror", lambda error: complaints.append(str(error)))
        page.goto(path.as_uri())
        return Opened(page, asked, complaints)

    yield open_page
    for context in contexts:
        context.close()


def pages(campaign: Path) -> list[Path]:
    return [campaign / "campaign.html", *sorted((campaign / "results").glob("*.html"))]


def shown_ids(page: Any) -> list[str]:
    """Names of the shots in the list, as they stand on the screen from top to bottom."""
    rows = [row for row in page.locator("#shots tbody tr").all() if row.is_visible()]
    return [row.locator("th a").first.inner_text() for row in rows]


def test_nothing_is_asked_of_anyone_and_nothing_complains(campaign: Path, opened: Any) -> None:
    for path in pages(campaign):
        one = opened(path)
        assert one.asked == [path.as_uri()]
        assert one.complaints == []
        assert one.page.locator("svg").count() >= 6


def test_the_policy_stops_a_script_that_got_in_all_the_same(
    campaign: Path, opened: Any, tmp_path: Path
) -> None:
    # The test of the test: were a hostile string not escaped, the policy would still hold.
    text = (campaign / "results" / "W-01.html").read_text(encoding="utf-8")
    spoilt = text.replace(
        "</main>", "<script>document.title = 'owned'</script><img src='http://127.0.0.1:9/x'></main>"
    )
    path = tmp_path / "spoilt.html"
    path.write_text(spoilt, encoding="utf-8")
    one = opened(path)
    assert one.page.title() == "Shot W-01: accept"
    stopped = [said for said in one.complaints if "Content Security Policy" in said]
    assert any("script" in said for said in stopped)
    assert any("http://127.0.0.1:9/x" in said and "img-src" in said for said in stopped)


def test_figures_are_drawn_in_their_own_colours(campaign: Path, opened: Any) -> None:
    page = opened(campaign / "results" / "W-01.html").page
    # A policy that shuts out inline styles would leave every path black and filled.
    fills = page.locator("svg path").evaluate_all("all => all.map(one => getComputedStyle(one).fill)")
    strokes = page.locator("svg path").evaluate_all("all => all.map(one => getComputedStyle(one).stroke)")
    assert "none" in fills
    assert "rgb(21, 37, 92)" in strokes
    sizes = page.locator("svg").evaluate_all("all => all.map(one => one.getBoundingClientRect().width)")
    assert min(sizes) > 250


@pytest.mark.parametrize("scripts", [True, False], ids=["scripts on", "scripts off"])
def test_the_list_is_ordered_by_what_is_chosen(campaign: Path, opened: Any, scripts: bool) -> None:
    page = opened(campaign / "campaign.html", scripts=scripts).page
    rates = {}
    for name in SHOTS:
        with h5py.File(campaign / "results" / f"{name}.h5") as file:
            rates[name] = float(file["response"].attrs["mean_strain_rate"])
    assert shown_ids(page) == list(SHOTS)
    page.get_by_text("rate, low first", exact=True).click()
    assert shown_ids(page) == sorted(SHOTS, key=rates.__getitem__)
    page.get_by_text("verdict, gravest first", exact=True).click()
    assert shown_ids(page)[0] == "W-05"
    # By keyboard too: the choices are one group, and an arrow takes the next.
    page.locator("#by-rate").focus()
    page.keyboard.press("Space")
    page.keyboard.press("ArrowUp")
    assert page.locator("#by-temperature").is_checked()


def test_the_numbers_on_the_screen_are_those_of_the_file(campaign: Path, opened: Any) -> None:
    page = opened(campaign / "results" / "W-03.html").page
    with h5py.File(campaign / "results" / "W-03.h5") as file:
        table, facts = file["response/flow_stress"][()], dict(file["response"].attrs)
    said = page.locator(".verdict").inner_text()
    assert said.startswith("ACCEPT")
    rate = re.search(r"Mean rate ([\d.]+) /s", said)
    assert rate is not None
    assert float(rate[1]) == pytest.approx(facts["mean_strain_rate"], rel=5e-3)
    rows = page.locator("#numbers table").first.locator("tbody tr").all()
    assert len(rows) == len(table)
    for row, (strain, stress, _) in zip(rows, table, strict=True):
        cells = row.locator("th, td").all_inner_texts()
        assert float(cells[0]) == pytest.approx(strain)
        if cells[1] != "not in what counts":
            assert float(cells[1]) == pytest.approx(1e-6 * stress, rel=5e-3)


def test_figures_have_words_for_who_cannot_see_them(campaign: Path, opened: Any) -> None:
    page = opened(campaign / "results" / "W-03.html").page
    figures = page.get_by_role("img").all()
    assert len(figures) == 6
    names = [figure.evaluate("one => one.querySelector('title').textContent") for figure in figures]
    assert "True stress against true strain" in names
    assert page.get_by_role("img", name="True stress against true strain").count() == 1
    heads = page.get_by_role("columnheader", name="True stress (MPa)")
    assert heads.count() == 1


@pytest.mark.parametrize("name", ["campaign.html", "results/W-01.html"])
def test_a_small_screen_scrolls_tables_but_not_the_page(campaign: Path, opened: Any, name: str) -> None:
    page = opened(campaign / name, width=320).page
    assert page.evaluate("document.documentElement.scrollWidth") == 320
    smallest = page.locator("svg text").evaluate_all(
        "all => Math.min(...all.map(one => one.getBoundingClientRect().height))"
    )
    assert smallest >= 6  # px of a line of letters; turned labels are wider than high


def test_links_of_the_campaign_lead_to_its_shots_and_back(campaign: Path, opened: Any) -> None:
    one = opened(campaign / "campaign.html")
    one.page.locator("#shots a:visible", has_text="W-04").first.click()
    assert one.page.locator("h1").inner_text() == "Shot W-04"
    one.page.get_by_text("All shots of the campaign").click()
    assert one.page.locator("h1").inner_text() == "Campaign lab #1 & <b>"
    assert one.complaints == []


@pytest.mark.parametrize("name", ["campaign.html", "results/W-05.html"])
def test_it_prints_on_a4(campaign: Path, opened: Any, tmp_path: Path, name: str) -> None:
    page = opened(campaign / name).page
    paper = tmp_path / "paper.pdf"
    page.pdf(path=str(paper), prefer_css_page_size=True)
    if shutil.which("pdftotext") is None or shutil.which("pdfinfo") is None:
        pytest.skip("there is no pdftotext and pdfinfo (poppler)")
    info = subprocess.run(["pdfinfo", paper], capture_output=True, text=True, check=True).stdout
    size = re.search(r"Page size:\s+([\d.]+) x ([\d.]+) pts", info)
    assert size is not None
    # ISO 216: A4 is 210 mm x 297 mm.
    assert [float(end) for end in size.groups()] == [
        pytest.approx(210 / 25.4 * 72, abs=1.5),
        pytest.approx(297 / 25.4 * 72, abs=1.5),
    ]
    text = subprocess.run(
        ["pdftotext", "-layout", paper, "-"], capture_output=True, text=True, check=True
    ).stdout
    assert "never about safety" in " ".join(text.split())
    if name == "campaign.html":
        assert all(re.search(rf"^\s*{shot}\s", text, re.M) for shot in SHOTS)
        assert "Order by" not in text
    else:
        assert "REJECT" in text
        assert "word for word" not in text  # folded files stay on the screen


def test_what_is_printed_stands_in_the_order_that_was_chosen(
    campaign: Path, opened: Any, tmp_path: Path
) -> None:
    if shutil.which("pdftotext") is None:
        pytest.skip("there is no pdftotext (poppler)")
    page = opened(campaign / "campaign.html").page
    page.get_by_text("verdict, gravest first", exact=True).click()
    paper = tmp_path / "paper.pdf"
    page.pdf(path=str(paper), prefer_css_page_size=True)
    text = subprocess.run(
        ["pdftotext", "-layout", paper, "-"], capture_output=True, text=True, check=True
    ).stdout
    rows = re.findall(r"^\s*(W-0\d)\s.*(?:accept|reject)", text, re.M)
    assert rows[0] == "W-05"
    assert sorted(rows) == sorted(SHOTS)  # each once: the other orders are not printed
