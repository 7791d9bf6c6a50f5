"""The page in Chromium: its numbers are Python's, and it works by keyboard, aloud, narrow, in the dark and on paper."""

import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from matplotlib.figure import Figure
from scipy import special

import bayesmed as bm
from bayesmed.conclusions.summary import summary
from bayesmed.conclusions.words import number_text, probability_text
from bayesmed.fit.result import FitResult, Settings
from bayesmed.plots.picture import Picture
from bayesmed.report.document import document
from bayesmed.report.findings import Findings, find
from bayesmed.report.page import Page, as_page, explore, vector_images
from tests.report.chromium import Browser, chromium, why_missing
from tests.report.hostile import HOSTILE, hostile

pytestmark = pytest.mark.skipif(bool(why_missing()), reason=why_missing())

AT = {"confidence": [4, 6, 8]}
MEAN = 0.25


@pytest.fixture(scope="module")
def chained(knee: FitResult) -> FitResult:
    """The exact draws in an order in which neighbours resemble each other, as if a sampler had made them."""
    order = np.argsort(knee.flat("alpha")[:, 1] + 0.03 * np.random.default_rng(2).normal(size=1000)) % 1000
    tree = knee.tree.copy()
    posterior = tree["posterior"].to_dataset()
    for name in posterior.data_vars:
        values = posterior[name].to_numpy()
        flat = values.reshape(1000, *values.shape[2:])[order.reshape(250, 4).T.ravel()]
        posterior[name] = (posterior[name].dims, flat.reshape(values.shape))
    tree["posterior"] = type(tree)(posterior)
    return knee.replaced(tree=tree, settings=Settings("nuts", 250, 100, 4, 1))


@pytest.fixture(scope="module")
def pages(knee: FitResult, chained: FitResult, tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    folder = tmp_path_factory.mktemp("pages")
    cut = {"nothing left out": 0.0, "drive": bm.TruncatedNormal(MEAN, 0.15)}
    plain = explore(find(knee, cut, AT))
    stand_in = Picture(Figure(figsize=(0.1, 0.1)), HOSTILE, HOSTILE)
    beside = f"<!doctype html><title>notebook</title><p id='notebook'>notebook</p>{plain._repr_html_()}"
    (folder / "notebook.html").write_text(beside, encoding="utf-8")
    return {
        "plain": plain.save(folder / "plain.html"),
        "chained": _bare(find(chained, cut, AT), {}).save(folder / "chained.html"),
        "hostile": _bare(hostile(), {"effect_by_rho": stand_in}).save(folder / "hostile.html"),
        "notebook": folder / "notebook.html",
    }


def _bare(found: Findings, pictures: dict[str, Picture]) -> Page:
    return Page(as_page(document(found, pictures), vector_images(pictures)))


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    with chromium() as started:
        yield started


def stated_beliefs() -> list[tuple[dict[str, Any], Any]]:
    """Fifty beliefs as the page states them, beside the same in Python."""
    random = np.random.default_rng(20261201)
    found: list[tuple[dict[str, Any], Any]] = []
    for _ in range(17):
        mean, sd = random.uniform(-0.9, 0.9), random.uniform(0.01, 1)
        found.append(({"family": "normal", "mean": mean, "sd": sd}, bm.TruncatedNormal(mean, sd)))
        low, high = np.sort(random.uniform(-0.97, 0.97, 2))
        in_python = bm.from_quantiles({0.05: low, 0.95: high}, family="FisherNormal")
        found.append(({"family": "quantiles", "low": low, "high": high}, in_python))
        m, y, positive = random.uniform(0, 0.95), random.uniform(0, 0.95), random.uniform()
        stated = {"family": "causes", "mediator": m, "outcome": y, "positive": positive}
        found.append((stated, bm.SharedCause(m, y, positive=positive)))
    return found[:50]


def in_python(result: FitResult, prior: Any, point: int, limit: float) -> tuple[Any, str]:
    claim = bm.Claim("indirect", above=limit)
    row = summary(result, {"confidence": AT["confidence"][point]}, prior, claim).iloc[0]
    return row, claim.verdict(row["probability"], row["mcse"])


@pytest.mark.parametrize("page", ["plain", "chained"])
def test_fifty_beliefs_have_pythons_numbers(
    browser: Browser, pages: dict[str, Path], knee: FitResult, chained: FitResult, page: str
) -> None:
    result = knee if page == "plain" else chained
    random = np.random.default_rng(7)
    asked = [
        (stated, prior, int(random.integers(3)), float(random.normal(0.5, 1.5))) for stated, prior in stated_beliefs()
    ]
    browser.open(pages[page])
    told = browser.run(
        "return arguments[0].map(([stated, point, limit]) => bayesmedPage.judged(stated, point, limit))",
        [[stated, point, limit] for stated, _, point, limit in asked],
    )
    for (stated, prior, point, limit), page_says in zip(asked, told, strict=True):
        row, verdict = in_python(result, prior, point, limit)
        shown = f"{stated} at {point}, limit {limit}"
        assert page_says["probability"] == pytest.approx(row["probability"], abs=5e-4), shown
        assert page_says["error"] == pytest.approx(row["mcse"], rel=0.02, abs=2e-5), shown
        assert page_says["lower"] == pytest.approx(row["lower"], abs=5e-4, rel=5e-4), shown
        assert page_says["upper"] == pytest.approx(row["upper"], abs=5e-4, rel=5e-4), shown
        assert page_says["verdict"] == verdict, shown


def test_its_normal_distribution_is_scipys(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"])
    grid = np.concatenate([np.linspace(-37, 37, 1481), np.linspace(-3, 3, 601), [0.0, 1e-300, -1e-12]])
    both = browser.run(
        "return arguments[0].map((x) => [bayesmedPage.erf(x), bayesmedPage.normalBelow(x)])", grid.tolist()
    )
    told = np.array(both)
    np.testing.assert_allclose(told[:, 0], special.erf(grid), rtol=3e-15, atol=0)
    # Far out, half the square of z in the exponent is known to some 700 roundings.
    np.testing.assert_allclose(told[:, 1], special.ndtr(grid), rtol=1e-12, atol=0)


def test_typing_and_sliding_give_pythons_numbers_and_an_address(
    browser: Browser, pages: dict[str, Path], knee: FitResult
) -> None:
    from selenium.webdriver.common.keys import Keys

    browser.open(pages["plain"])
    row, _ = in_python(knee, bm.TruncatedNormal(MEAN, 0.15), 0, 0.0)
    assert browser.text("answer-number") == probability_text(row["probability"], row["mcse"])
    slider = browser.element("range-mean")
    slider.send_keys(Keys.ARROW_RIGHT, Keys.ARROW_RIGHT, Keys.ARROW_RIGHT)
    browser.settled()
    assert browser.element("number-mean").get_property("value") == "0.28"
    row, _ = in_python(knee, bm.TruncatedNormal(0.28, 0.15), 0, 0.0)
    assert browser.text("answer-number") == probability_text(row["probability"], row["mcse"])
    number = browser.element("number-sd")
    number.send_keys(Keys.CONTROL, "a")
    number.send_keys("0.07")
    browser.element("point").send_keys("confidence = 8")
    limit = browser.element("limit")
    limit.send_keys(Keys.CONTROL, "a")
    limit.send_keys("1.5")
    browser.settled()
    row, verdict = in_python(knee, bm.TruncatedNormal(0.28, 0.07), 2, 1.5)
    words = browser.text("answer-words")
    assert browser.text("answer-number") == probability_text(row["probability"], row["mcse"])
    assert verdict in browser.text("answer-verdict")
    assert f"95 % interval {number_text(row['lower'])} to {number_text(row['upper'])}" in words
    assert "at confidence = 8" in words
    assert "bm.TruncatedNormal(0.28, 0.07)" in browser.text("python-line")
    fragment = "#" + browser.driver.current_url.split("#")[1]
    assert fragment == "#family=normal&mean=0.28&sd=0.07&point=2&limit=1.5"
    browser.open(pages["plain"], fragment)
    assert browser.text("answer-words") == words
    assert browser.element("link-line").get_property("value").endswith(fragment)


def test_the_line_in_python_says_the_same(browser: Browser, pages: dict[str, Path], knee: FitResult) -> None:
    from bayesmed.front.fit import Fit

    for fragment in (
        "#family=quantiles&low=-0.1&high=0.35&point=1&limit=0.5",
        "#family=causes&mediator=0.3&outcome=0.4&positive=0.9&point=2&limit=0",
    ):
        browser.open(pages["plain"], fragment)
        row = eval(browser.text("python-line"), {"fit": Fit(knee), "bm": bm}).iloc[0]
        assert browser.text("answer-number") == probability_text(row["probability"], row["mcse"])


def test_an_address_with_nonsense_is_read_as_far_as_it_goes(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"], "#family=normal&mean=7&sd=x&point=99&limit=&evil=<b>")
    state = browser.run("return bayesmedPage.state()")
    assert (state["mean"], state["sd"], state["point"], state["limit"]) == (0.9, 0.15, 0, 0)
    browser.open(pages["plain"], "#family=__proto__&mean=0")
    assert browser.run("return bayesmedPage.state().mean") == MEAN
    assert browser.logged() == []


def test_quantiles_in_the_wrong_order_are_refused_in_words(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"], "#family=quantiles&low=0.5&high=0.2&point=0&limit=0")
    assert "must lie below" in browser.text("belief-problem")


def test_nothing_is_logged_and_nothing_asked_of_any_network(browser: Browser, pages: dict[str, Path]) -> None:
    for page in pages.values():
        browser.open(page)
        browser.run("document.querySelectorAll('[data-key=family]').forEach((each) => each.click())")
        browser.settled()
        assert browser.logged() == []
        assert browser.requested() == [page.as_uri()]


def test_the_page_may_not_reach_out_nor_run_what_is_put_in(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"])
    refused = browser.driver.execute_async_script(
        """const done = arguments[0], put = document.createElement("script");
        put.textContent = "window.harmed = 1"; document.body.append(put);
        fetch("https://example.org").then(() => done("reached"), () => done("refused"));"""
    )
    assert refused == "refused"
    assert browser.run("return window.harmed") is None
    blocked = [words for words in browser.logged() if "Content Security Policy" in words]
    assert len(blocked) >= 2


def test_every_control_has_a_role_and_a_name_of_its_own(browser: Browser, pages: dict[str, Path]) -> None:
    for page, families in (("plain", ("normal", "quantiles", "causes")), ("hostile", ("causes",))):
        for family in families:
            browser.open(pages[page], f"#family={family}")
            nodes = browser.names()
            controls = [
                node for node in nodes if node[0] in ("slider", "spinbutton", "radio", "combobox", "button", "textbox")
            ]
            assert len(controls) == 3 + 2 * (3 if family == "causes" else 2) + 2 + 2 + 1
            assert all(name.strip() for _, name in controls)
            assert len(set(controls)) == len(controls)
            roles = {role for role, _ in nodes}
            assert {"main", "navigation", "heading", "status", "group", "table", "image"} <= roles or "img" in roles
            assert all(name for role, name in nodes if role in ("image", "img", "link", "heading", "region"))
    browser.open(pages["plain"])
    levels = browser.run("return [...document.querySelectorAll('h1,h2,h3')].map((each) => +each.tagName[1])")
    assert levels.count(1) == 1
    assert max(np.diff(levels)) == 1
    assert browser.run("return document.documentElement.lang") == "en"
    twice = browser.run(
        "const ids = [...document.querySelectorAll('[id]')].map((each) => each.id);"
        "return ids.length - new Set(ids).size"
    )
    assert twice == 0


def test_what_changed_is_spoken_once_it_has_settled(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"])
    browser.driver.execute_async_script("setTimeout(arguments[0], 700)")
    spoken = browser.text("spoken")
    assert spoken.startswith(f"Probability {browser.text('answer-number')}. {browser.text('answer-verdict')}")
    assert browser.element("spoken").get_attribute("aria-live") == "polite"


def test_everything_can_be_reached_by_keyboard(browser: Browser, pages: dict[str, Path]) -> None:
    from selenium.webdriver import ActionChains
    from selenium.webdriver.common.keys import Keys

    browser.open(pages["plain"])
    reached = []
    for _ in range(26):
        ActionChains(browser.driver).send_keys(Keys.TAB).perform()
        reached.append(browser.run("return document.activeElement.id || document.activeElement.className"))
    order = ["skip", "range-mean", "number-mean", "range-sd", "number-sd", "point", "limit", "start-again", "copy-link"]
    assert [reached.index(name) for name in order] == sorted(reached.index(name) for name in order)
    outline = browser.run("return getComputedStyle(document.activeElement).outlineStyle")
    assert outline == "solid"


@pytest.mark.parametrize("page", ["plain", "hostile"])
def test_a_narrow_window_does_not_scroll_sideways(browser: Browser, pages: dict[str, Path], page: str) -> None:
    browser.open(pages[page], "#family=causes")
    browser.width(360)
    browser.settled()
    assert browser.run("return document.documentElement.scrollWidth - document.documentElement.clientWidth") == 0
    drawn = browser.run("return document.querySelector('#live-picture svg').getBoundingClientRect().right")
    assert drawn <= 360


def _contrast(one: list[float], other: list[float]) -> float:
    """Contrast ratio of WCAG 2.2, success criterion 1.4.3."""

    def luminance(colour: list[float]) -> float:
        share = np.array(colour) / 255
        linear = np.where(share <= 0.04045, share / 12.92, ((share + 0.055) / 1.055) ** 2.4)
        return float(linear @ [0.2126, 0.7152, 0.0722])

    high, low = sorted((luminance(one), luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_text_stands_out_in_light_and_dark(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"])
    papers = []
    for scheme in ("light", "dark"):
        browser.media(scheme=scheme)
        for selector, ground in (
            ("body", "body"), (".live .small", ".live"), (".live legend", ".live"), ("figcaption", "body"),
            ("nav a", "body"), (".gap", ".gap"), (".picture text", ".live"), ("button", "button"), ("code", "code"),
        ):  # fmt: skip
            ink, paper = browser.run(
                """const [ink, paper] = arguments, of = (name) => getComputedStyle(document.querySelector(name));
                return [ink === ".picture text" ? of(ink).fill : of(ink).color, of(paper).backgroundColor]""",
                selector, ground,
            )  # fmt: skip
            colours = [[float(part) for part in re.findall(r"[\d.]+", colour)[:3]] for colour in (ink, paper)]
            assert _contrast(*colours) >= 4.5, (scheme, selector, ink, paper)
        papers.append(browser.run("return getComputedStyle(document.body).backgroundColor"))
    assert papers[0] != papers[1]


def test_it_prints_as_a_report_that_does_not_move(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["plain"], "#family=normal&mean=0.1&sd=0.1&point=1&limit=0")
    browser.media("print", "dark")
    shown = "return getComputedStyle(document.querySelector(arguments[0])).display"
    for hidden in (".controls", "nav", ".share", ".skip"):
        assert browser.run(shown, hidden) == "none"
    for kept in (".answer", "#answer-words", "#live-picture svg", "table"):
        assert browser.run(shown, kept) != "none"
    assert browser.run("return getComputedStyle(document.body).backgroundColor") == "rgb(255, 255, 255)"
    assert browser.printed().startswith(b"%PDF")


def test_hostile_names_are_shown_whole_and_do_nothing(browser: Browser, pages: dict[str, Path]) -> None:
    browser.open(pages["hostile"])
    assert browser.run("return window.harmed") is None
    assert browser.run("return document.querySelector('h1').textContent") == HOSTILE
    assert browser.driver.title.split() == HOSTILE.split()
    assert browser.run("return document.querySelectorAll('img[onerror], h1 *, td b, option *').length") == 0
    options = browser.run("return [...document.querySelectorAll('#point option')].map((each) => each.textContent)")
    assert sorted(options) == [f'g"><b> = {HOSTILE}', 'g"><b> = =1+1']
    cells = browser.run("return [...document.querySelectorAll('td')].map((each) => each.textContent)")
    assert HOSTILE in cells


def test_in_a_notebook_it_works_shut_in(browser: Browser, pages: dict[str, Path], knee: FitResult) -> None:
    browser.open(pages["notebook"])
    frame = browser.driver.find_element("tag name", "iframe")
    assert frame.get_attribute("sandbox") == "allow-scripts"
    browser.driver.switch_to.frame(frame)
    row, _ = in_python(knee, bm.TruncatedNormal(MEAN, 0.15), 0, 0.0)
    assert browser.text("answer-number") == probability_text(row["probability"], row["mcse"])
    browser.run("document.querySelector('nav a[href=\"#method\"]').click()")
    assert browser.run("return window.scrollY") > 1000
    assert browser.text("answer-number") == probability_text(row["probability"], row["mcse"])
    assert browser.run("try { return parent.document.title } catch { return 'refused' }") == "refused"
    browser.driver.switch_to.default_content()
    assert browser.text("notebook") == "notebook"
