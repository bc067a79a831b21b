"""The report in a real browser: it sorts, filters, opens rows, stays quick, and runs nothing of the user's."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest
from browser import Page, browser_page, found_browser

import basirank.report as report
from basirank.entries import Entry, Subject, entries_of
from basirank.evidence import Analogue
from basirank.records import ranking
from basirank.report import page, report_html

pytestmark = pytest.mark.skipif(
    found_browser() is None, reason="no Chromium here; scripts/test installs it on Debian"
)

DEMO = Path(__file__).resolve().parent.parent / "data" / "demo.smi"
HOSTILE = (
    "<script>document.title='run'</script><img src=x onerror=\"document.title='run'\"> & {{style}} \u2028'\"`"
)

COLUMN = (
    "[...document.querySelectorAll('#table > tbody > tr:not(.detail) > .{}')].map((cell) => cell.innerText)"
)
TYPE = (
    "(() => {{ const box = document.getElementById('{}'); box.value = '{}'; "
    "box.dispatchEvent(new Event('input', {{ bubbles: true }})); }})()"
)
HEADING = "document.querySelector('th[data-key={}] button').click()"
COUNT = "document.getElementById('count').innerText"


def demo_subjects() -> list[Subject]:
    lines = [line.split(maxsplit=1) for line in DEMO.read_text().splitlines()]
    return [Subject(smiles, name.strip()) for smiles, name in lines]


@pytest.fixture(scope="module")
def demo_entries() -> list[Entry]:
    return entries_of(demo_subjects(), (7.4, 5.5))


def html_of(entries: list[Entry]) -> str:
    return page(
        [(rank, entries[n]) for rank, n in ranking([one.record for one in entries])], (7.4, 5.5), "Demo"
    )


@pytest.fixture(scope="module")
def browser(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Page]:
    with browser_page(tmp_path_factory.mktemp("profile")) as opened:
        yield opened


@pytest.fixture
def demo(browser: Page, demo_entries: list[Entry], tmp_path: Path) -> Iterator[Page]:
    """The demo list, freshly opened; whatever a test does, the browser has nothing to complain of."""
    path = tmp_path / "report.html"
    path.write_text(html_of(demo_entries), encoding="utf-8")
    browser.complaints.clear()
    browser.media()
    browser.open(path)
    yield browser
    assert browser.complaints == []


def pkah_shown(shown: Page) -> list[float]:
    return [float(text.split()[0]) for text in shown.value(COLUMN.format("scale"))]


def test_the_list_opens_ranked_and_a_heading_sorts_it(demo: Page):
    first = pkah_shown(demo)
    assert len(first) == 50 and first == sorted(first, reverse=True)
    demo.value(HEADING.format("pkah"))
    assert demo.value("document.querySelector('th[data-key=pkah]').getAttribute('aria-sort')") == "descending"
    demo.value(HEADING.format("pkah"))
    rising = pkah_shown(demo)
    assert rising == sorted(rising) and rising[0] < first[-1]
    demo.value(HEADING.format("name"))
    names = demo.value(COLUMN.format("compound"))
    assert names[0].startswith("TARN-1001") and names == sorted(names)
    assert demo.value("document.querySelector('th[data-key=pkah]').getAttribute('aria-sort')") == "none"


def test_filters_narrow_the_list_and_clear_restores_it(demo: Page):
    demo.value(TYPE.format("low", "6"))
    demo.value(TYPE.format("high", "9"))
    found = pkah_shown(demo)
    assert found and all(6 <= value <= 9 for value in found)
    demo.value(TYPE.format("support", "supported"))
    assert set(demo.value(COLUMN.format("support"))) == {"supported"}
    demo.value(TYPE.format("class", "primary aliphatic amine"))
    assert {text.split("\n")[0] for text in demo.value(COLUMN.format("class"))} == {"primary aliphatic amine"}
    demo.value("document.querySelector('#filters [type=reset]').click()")
    demo.value("new Promise((done) => setTimeout(done))")
    assert demo.value(COUNT) == "Rows 1 to 50 of 60"
    demo.value(TYPE.format("text", "tosylate"))
    assert demo.value(COUNT) == "Rows 1 to 1 of 1, chosen from 60"
    demo.value(TYPE.format("text", "no such text"))
    assert demo.value(COUNT) == "No row of 60 fits these filters"


def test_charge_is_filtered_at_the_ph_chosen(demo: Page):
    demo.value(TYPE.format("charge", "1"))
    at_7 = int(demo.value(COUNT).split(" of ")[1].split(",")[0])
    demo.value(TYPE.format("ph", "5.5"))
    at_5 = int(demo.value(COUNT).split(" of ")[1].split(",")[0])
    assert demo.value("document.getElementById('ph-shown').innerText") == "5.5"
    assert at_5 > at_7 > 0


def test_pages_of_the_list_turn(demo: Page):
    demo.value("document.getElementById('after').click()")
    assert demo.value(COUNT) == "Rows 51 to 60 of 60"
    assert demo.value("document.getElementById('after').disabled")
    assert "refused: cannot be read as SMILES" in demo.value(
        "document.querySelector('#table > tbody').innerText"
    )
    demo.value(TYPE.format("size", "100"))
    assert demo.value(COUNT) == "Rows 1 to 60 of 60"


def test_a_row_opens_by_keyboard_and_its_waterfall_adds_up(demo: Page):
    demo.value("document.querySelector('.compound button').focus()")
    demo.press("Enter", "\r", 13)
    assert demo.value("document.activeElement.getAttribute('aria-expanded')") == "true"
    told = demo.value("document.querySelector('tr.detail').innerText")
    assert "Macroscopic constants" in told and "dominant form" in told
    numbers = demo.value(
        "[...document.querySelectorAll('details[open] .terms:not(.evidence) td.number')].map((cell) => cell.innerText)"
    )
    *terms, total = [float(text.replace("\u2212", "-")) for text in numbers]
    assert sum(terms) == pytest.approx(total, abs=0.005 * len(terms) + 0.005)
    shaded = demo.value("document.querySelectorAll('tr.detail .shades circle').length")
    assert shaded > 0
    demo.press("Enter", "\r", 13)
    assert demo.value("document.querySelector('tr.detail')") is None


def test_a_term_shows_its_atoms_alone(demo: Page):
    demo.value("document.querySelector('.compound button').click()")
    demo.value("document.querySelector('details[open] .terms button').click()")
    assert (
        demo.value("document.querySelector('details[open] .terms button').getAttribute('aria-pressed')")
        == "true"
    )
    atoms = demo.value("document.querySelector('details[open] .terms .message').innerText").count(",") + 1
    assert demo.value("document.querySelectorAll('tr.detail .shades circle').length") == atoms


def test_every_control_has_a_name_and_nothing_sticks_out(demo: Page):
    unnamed = """[...document.querySelectorAll('input, select, button')].filter((one) =>
        !one.innerText && !one.labels?.length && !one.getAttribute('aria-label')).length"""
    assert demo.value(unnamed) == 0
    assert demo.value("document.querySelectorAll('svg[role=img]:not([aria-label])').length") == 0
    demo.value(
        "[...document.querySelectorAll('.compound button')].slice(0, 20).forEach((one) => one.click())"
    )
    demo.value("document.querySelectorAll('tr.detail details').forEach((one) => { one.open = true; })")
    assert demo.value("document.querySelectorAll('svg[role=img]:not([aria-label])').length") == 0
    for width in (1280, 960, 800, 400):
        demo.resize(width, 900)
        assert demo.value("document.documentElement.scrollWidth") <= width


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_text_stands_out_from_its_ground(demo: Page, scheme: str):
    """Contrast of at least 4.5 for text and 3 for lines that carry meaning (WCAG 2.2, criteria 1.4.3 and 1.4.11)."""
    demo.media("screen", scheme)
    colours = demo.value(
        """(() => { const seen = getComputedStyle(document.documentElement);
        const names = ["paper", "panel", "tint", "ink", "quiet", "accent", "up", "down", "edge"];
        return Object.fromEntries(names.map((name) => [name, seen.getPropertyValue("--" + name).trim()])); })()"""
    )

    def luminance(colour: str) -> float:
        parts = [int(colour[n : n + 2], 16) / 255 for n in (1, 3, 5)]
        linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    def contrast(one: str, other: str) -> float:
        dark, light = sorted([luminance(colours[one]), luminance(colours[other])])
        return (light + 0.05) / (dark + 0.05)

    for ground in ("paper", "panel", "tint"):
        assert min(contrast(name, ground) for name in ("ink", "quiet", "accent")) >= 4.5, ground
        assert min(contrast(name, ground) for name in ("up", "down", "edge")) >= 3.0, ground


def test_hostile_text_stays_text(browser: Page, tmp_path: Path):
    subjects = [
        Subject("CCN", HOSTILE, (("</script>", HOSTILE),)),
        Subject("c1ccncc1", "</script><script>document.title='run'</script>"),
        Subject("<img src=x onerror=alert(1)>", HOSTILE),
    ]
    entries = entries_of(subjects, (7.4,))
    path = tmp_path / "hostile.html"
    path.write_text(page([(None, one) for one in entries], (7.4,), HOSTILE), encoding="utf-8")
    browser.complaints.clear()
    browser.open(path)
    browser.value("document.querySelectorAll('.compound button').forEach((one) => one.click())")
    assert browser.value("document.querySelector('h1').innerText").startswith("<script>")
    assert browser.value("document.title") != "run"
    assert browser.value("document.querySelectorAll('img').length") == 0
    assert browser.value("document.querySelectorAll('script').length") == 3
    names = browser.value("[...document.querySelectorAll('.compound button')].map((one) => one.textContent)")
    assert names == [HOSTILE, subjects[1].name, HOSTILE]
    assert HOSTILE in browser.value("document.querySelector('tr.detail').textContent")
    assert browser.complaints == []


def test_measured_analogues_are_shown_with_their_sources(browser: Page, tmp_path: Path):
    (entry,) = entries_of([Subject("CCN", "ethylamine")], (7.4,))
    analogue = Analogue("N-<i>propyl</i>", "CCC[NH2:1]", "pkah", 10.57, "a source & page", 0.42, -0.07)
    sites = tuple(replace(site, evidence=(analogue,)) for site in entry.told.sites)
    entry = replace(entry, told=replace(entry.told, sites=sites))
    path = tmp_path / "evidence.html"
    path.write_text(page([(1, entry)], (7.4,), "Evidence"), encoding="utf-8")
    browser.open(path)
    browser.value("document.querySelector('.compound button').click()")
    told = browser.value("document.querySelector('.evidence').innerText")
    for text in ("N-<i>propyl</i>", "CCC[NH2:1]", "pKaH 10.57", "0.42", "\u22120.07", "a source & page"):
        assert text in told
    assert browser.value("document.querySelectorAll('.evidence .b-mark').length") == 1


def test_five_thousand_rows_stay_a_page_at_a_time(
    browser: Page, demo_entries: list[Entry], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
):
    """Only a page of rows is ever in the document, whatever the length of the list."""
    known: dict[int, dict] = {}
    detail = report._detail

    def once(entry, *kept):
        if id(entry) not in known:
            known[id(entry)] = detail(entry, *kept)
        return known[id(entry)]

    monkeypatch.setattr(report, "_detail", once)
    entries = (demo_entries * 84)[:5000]
    path = tmp_path / "long.html"
    path.write_text(html_of(entries), encoding="utf-8")
    browser.complaints.clear()
    browser.open(path)
    assert browser.value("document.querySelectorAll('#table > tbody > tr').length") == 50
    spent = browser.value(
        f"(() => {{ const start = performance.now(); {HEADING.format('name')}; {TYPE.format('low', '7.5')}; "
        "return performance.now() - start; })()"
    )
    assert spent < 5000  # milliseconds: a bound that only a page which lays out every row would miss
    assert "chosen from 5,000" in browser.value(COUNT)
    assert browser.value("document.querySelectorAll('#table > tbody > tr').length") == 50
    assert browser.complaints == []


@pytest.mark.parametrize("structures", [[], ["C(", "nonsense"], ["CCO", "c1ccccc1"]])
def test_a_list_without_any_base_is_a_page_too(browser: Page, tmp_path: Path, structures: list[str]):
    path = tmp_path / "none.html"
    path.write_text(report_html(structures), encoding="utf-8")
    browser.complaints.clear()
    browser.open(path)
    browser.value("document.querySelectorAll('.compound button').forEach((one) => one.click())")
    browser.value(HEADING.format("pkah"))
    assert browser.value("document.querySelectorAll('#table > tbody > tr:not(.detail)').length") == len(
        structures
    )
    assert browser.complaints == []


def test_the_page_names_no_address_and_says_the_caution_once():
    text = report_html(["CCN", "OC(=O)CN", "nonsense("], names=["a", "b", "c"])
    assert "http" not in text.replace("http://www.w3.org/2000/svg", "").replace("http-equiv", "")
    assert text.count("no basis for dosing") == 1
    assert text == report_html(["CCN", "OC(=O)CN", "nonsense("], names=["a", "b", "c"])
