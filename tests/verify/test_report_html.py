"""The report in a browser: complete, quiet, alone, readable at any width, and deaf to what names try to inject."""

from __future__ import annotations

import re
from collections.abc import Iterator
from hashlib import sha256
from pathlib import Path

import pytest
from browser import Page, browser, needs_browser

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import not_, var
from settled.verify import check
from settled.verify.inputs import gallery
from settled.verify.renderers.report_html import files, to_html
from settled.verify.result import FileReport, Result, Step, Trace
from settled.verify.session import Session, Settings, load

NAMES = ("level_latch", "sample_flip_flop_wires", "wake_latch_unruled", "clock_switch_plain", "level_latch_cured")
HOSTILE = """
title = "<img src=x onerror=alert(1)>"
[circuit]
inputs = ["</style><i>x</i>", "a_long_name_of_a_signal.somewhere_down.in_the_hierarchy.of_the_board"]
outputs = ["</script><script>alert(2)</script>"]
[circuit.excitation]
"</script><script>alert(2)</script>" = '\\</style><i>x</i> & ~\\" '
'"' = '\\</style><i>x</i> '
[[property]]
name = "<script>alert(1)</script>"
check = "hazard-free"
[[property]]
name = "</svg><svg onload=alert(3)>"
check = "never"
expr = '\\" '
"""
WIDTHS = [(1280, "light"), (1280, "dark"), (390, "light"), (390, "dark")]
TROUBLE = ("Log.entryAdded", "Runtime.exceptionThrown", "Runtime.consoleAPICalled", "Page.javascriptDialogOpening")


@pytest.fixture(scope="module")
def reports() -> list[FileReport]:
    every = Session(load(gallery()["clock_switch_plain"]), Settings(every=True))
    causes = every.report(list(every.results()))
    return [*(check(gallery()[name]) for name in NAMES), causes, check("hostile.toml", text=HOSTILE)]


@pytest.fixture(scope="module")
def written(reports: list[FileReport], tmp_path_factory: pytest.TempPathFactory) -> Path:
    ((name, text),) = files(reports, {}).items()
    path = tmp_path_factory.mktemp("report") / name
    path.write_text(text, encoding="utf-8")
    return path


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Page]:
    with browser(tmp_path_factory.mktemp("profile")) as found:
        yield found


@needs_browser
@pytest.mark.parametrize(("width", "scheme"), WIDTHS)
def test_nothing_is_cut_off_and_nothing_is_asked_for(
    page: Page, written: Path, tmp_path: Path, width: int, scheme: str
) -> None:
    page.open(written, width, scheme=scheme)
    page.screenshot(tmp_path / "page.png")
    assert [event for event in page.events if event[0] in TROUBLE] == []
    asked = [found["request"]["url"] for name, found in page.events if name == "Network.requestWillBeSent"]
    assert [url for url in asked if not url.startswith("data:")] == [written.as_uri()]
    assert page.evaluate("document.documentElement.scrollWidth <= document.documentElement.clientWidth")
    beyond = """[...document.querySelectorAll('main *, header *, footer *')].filter(e => {
        const box = e.getBoundingClientRect();
        return box.width && !e.closest('thead') && (box.right > innerWidth + 0.5 || box.left < -0.5);
    }).map(e => e.outerHTML.slice(0, 80))"""
    assert page.evaluate(beyond) == []


@needs_browser
def test_text_keeps_inside_its_drawings(page: Page, written: Path) -> None:
    page.open(written, 1280)
    beyond = """[...document.querySelectorAll('main svg text')].filter(e => {
        const text = e.getBoundingClientRect(), svg = e.ownerSVGElement.getBoundingClientRect();
        return text.width && (text.right > svg.right + 1 || text.left < svg.left - 1 || text.bottom > svg.bottom + 1);
    }).map(e => e.textContent)"""
    assert page.evaluate(beyond) == []


@needs_browser
def test_hostile_names_are_text(page: Page, written: Path) -> None:
    page.open(written, 1280)
    assert page.evaluate("document.scripts.length") == 1
    assert page.evaluate("document.querySelectorAll('main img, main i, [onload], [onerror]').length") == 0
    titles = page.evaluate("[...document.querySelectorAll('article h3')].map(e => e.firstChild.data.trim())")
    assert "<script>alert(1)</script>" in titles and "</svg><svg onload=alert(3)>" in titles


@needs_browser
def test_every_step_of_every_run_is_there(page: Page, reports: list[FileReport], written: Path) -> None:
    page.open(written, 1280)
    shown = page.evaluate(
        """[...document.querySelectorAll('article')].map(a => [...a.querySelectorAll('.steps tr[data-step]')].flatMap(
            r => r.dataset.runs.split(' ').map(run => [Number(run), Number(r.dataset.step),
                Object.fromEntries([...r.querySelectorAll('.bit')].map(
                    b => [b.firstChild.textContent, b.querySelector('b').textContent]))])))"""
    )
    results = [result for report in reports for result in report.results]
    assert len(shown) == len(results) and any(result.further for result in results)
    for rows, result in zip(shown, results, strict=True):
        found = {(run, step): bits for run, step, bits in rows}
        traces = (*result.traces, *result.further)
        assert len(found) == len(rows) == sum(len(trace.steps) for trace in traces)
        for (run, number), bits in found.items():
            step = traces[run].steps[number]
            expected = {n: f"{v}{'*' if n in step.excited else ''}" for n, v in step.state.items()}
            assert bits.items() <= expected.items() and set(step.excited) <= bits.keys()


def here(page: Page, article: str) -> list[str]:
    """The steps that are lit in the tables of an article."""
    found: list[str] = page.evaluate(
        f"[...document.querySelectorAll('#{article} tr.here')].map(e => e.dataset.runs + ':' + e.dataset.step)"
    )
    return found


@needs_browser
def test_the_controls_work_by_keyboard_alone(page: Page, written: Path) -> None:
    page.open(written, 1280)
    article = "file-1-property-3"
    output = f"[...document.querySelectorAll('#{article} output')].map(e => e.textContent)"
    assert page.evaluate(f"document.querySelector('#{article} h3').textContent").startswith("race-free")
    for _ in range(200):
        page.press("Tab")
        if page.evaluate(f'document.activeElement.matches(\'#{article} [data-run="0"] [data-go="first"]\')'):
            break
    page.press("Enter")
    assert here(page, article) == ["0 1:0"] and page.evaluate(output)[0] == "Step 0 of 3; start; stable"
    for expected in ("0 1:1", "0:2", "0:3", "0:3"):
        page.press("ArrowRight")
        assert here(page, article) == [expected]
    assert page.evaluate(output)[0].startswith("Step 3 of 3; n+/q-; stable")
    page.press("Home")
    assert here(page, article) == ["0 1:0"]
    page.press("End")
    page.press("ArrowLeft")
    assert here(page, article) == ["0:2"]
    for _ in range(4):
        page.press("Tab")
    page.press(" ")
    assert here(page, article) == ["0 1:1"], "where they part"
    lit = page.evaluate(f"document.querySelectorAll('#{article} .column.here').length")
    assert lit == 2, "the column in the common beginning, and again at the head of the ending"


@needs_browser
def test_both_schemes_are_readable(page: Page, written: Path) -> None:
    """Contrast of text as in WCAG 2, success criterion 1.4.3 (recalled): at least 4.5 to 1."""
    script = """(() => {
        const light = c => { const v = c.map(x => (x /= 255) <= 0.04045 ? x / 12.92 : ((x + 0.055) / 1.055) ** 2.4);
            return 0.2126 * v[0] + 0.7152 * v[1] + 0.0722 * v[2]; };
        const colour = t => t.match(/[\\d.]+/g).map(Number);
        const ground = e => { for (; e; e = e.parentElement) { const c = colour(getComputedStyle(e).backgroundColor);
            if (c.length < 4 || c[3] > 0) return c; } return [255, 255, 255]; };
        const ratios = [...document.querySelectorAll('body *')].filter(e => [...e.childNodes].some(
            n => n.nodeType === 3 && n.data.trim()) && e.getBoundingClientRect().width && !e.closest('script,style'))
            .map(e => { const s = getComputedStyle(e), fill = e.closest('svg') ? s.fill : s.color;
                const [a, b] = [light(colour(fill)), light(ground(e))].sort((p, q) => q - p);
                return [(a + 0.05) / (b + 0.05), e.outerHTML.slice(0, 80)]; });
        return [ratios.length, ratios.filter(r => r[0] < 4.5)]; })()"""
    for scheme in ("light", "dark"):
        page.open(written, 1280, scheme=scheme)
        count, poor = page.evaluate(script)
        assert count > 500 and poor == []


def plain(html: str) -> str:
    """What a page says, without its marks, styles and scripts."""
    return re.sub(r"<[^>]+>", " ", re.sub(r"<(style|script)>.*?</\1>", "", html, flags=re.S))


def test_each_cause_stands_with_its_identity_and_its_fault(reports: list[FileReport]) -> None:
    (result,) = [r for report in reports for r in report.results if len(r.facts.get("causes", ())) > 1]
    said = " ".join(plain(to_html(reports)).split())
    for number, cause in enumerate(result.facts["causes"], 1):
        heading = f"Cause {cause['id']} ({number} of {len(result.facts['causes'])}), explains"
        assert heading in said
        told = said[said.index(heading) :]
        assert f"{cause['fault']['late']} was late" in told[: told.index("waveform")]


def test_it_says_what_a_review_needs(reports: list[FileReport]) -> None:
    html = to_html(reports)
    said = plain(html)
    for report in reports[:-1]:
        assert set(report.inputs) and all(digest in said for digest in report.inputs.values())
        digest = sha256(Path(report.file).read_bytes()).hexdigest()
        assert report.inputs[report.file] == digest
    wanted = ("Metastability", "independent person", "Certificate:", "stable total state", "under wire delays")
    for words in wanted:
        assert words.lower() in said.lower(), words
    assert html.count('class="stamp"') == sum(len(report.results) for report in reports)
    for word in ("glitch-free", "verified", "certified"):
        assert word not in said.lower()
    assert "http://" not in html.replace("http://www.w3.org/2000/svg", "") and "https://" not in html


def test_each_file_that_it_points_to_is_written(reports: list[FileReport]) -> None:
    from settled.verify.renderers import test_bench, waveform

    there = {*waveform.files(reports, {}), *test_bench.files(reports, {})}
    assert set(re.findall(r'<a href="([^#"]+)"', to_html(reports))) == there


def test_idle_nodes_of_a_large_circuit_are_folded_away() -> None:
    nodes = tuple(f"n{i}" for i in range(40))
    circuit = Circuit("large", ("x",), nodes, {n: not_(var("x")) for n in nodes}, ("n1",))
    rest = dict.fromkeys(nodes, 0)
    steps = (
        Step({"x": 0, **rest}, ("n3",), (), False),
        Step({"x": 0, **rest, "n3": 1}, (), ("n3",), True),
    )
    result = Result("r", "never", "refuted", "A claim.", "search", 0.0, traces=(Trace("the run", "large", steps),))
    html = to_html([FileReport("large.toml", "", circuit, Environment(), (), (result,))])
    assert "38 more nodes keep their value all along, never excited" in html
    (table,) = re.findall(r'<table class="steps".*?</table>', html, re.S)
    assert re.findall(r"<span>(\w+)</span>", table) == ["x", "n1", "n3"] * 2


def test_a_vacuous_and_an_undecided_verdict_stand_out() -> None:
    circuit = Circuit("c", ("x",), ("q",), {"q": var("x")}, ("q",))
    results = (
        Result("one", "settles", "proved", "It settles.", "search", 0.0, vacuous=True),
        Result("two", "settles", "undecided", "It settles.", "search", 60.0, reason="the time limit was reached"),
    )
    said = plain(to_html([FileReport("c.toml", "", circuit, Environment(), (), results)]))
    assert "proved, vacuous" in said and "Asked: It settles." in said and "Reason: the time limit was reached" in said
