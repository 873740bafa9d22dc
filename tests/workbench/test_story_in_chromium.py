"""The whole story in a real browser, at the width of a screen and of a telephone.

Upload unknowns → read the evidence → decide → propose a standard → review it as another person → find it → withdraw it.
"""

from __future__ import annotations

import os
import shutil
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from bench import DEMO, PASSWORD, Bench

from identify.workbench.people import set_person
from identify.workbench.sessions import Person

playwright = pytest.importorskip(
    "playwright.sync_api", reason="playwright is not installed: no story in a real browser"
)
CHROMIUM = shutil.which("chromium") or "/usr/bin/chromium"
FLAGS = (
    "--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--no-first-run",
)  # fmt: skip
WIDTHS = (1280, 390)
TIMEOUT_MS = 120_000
"""For each step; only a page that stands still reaches it."""
UNKNOWNS = ("03-drum-liquid.csv", "04-drum-liquid.msp", "12-hose-rinse.txt")
WIDER = """width => [...document.querySelectorAll("main *, header *, footer *")]
    .filter(part => part.getBoundingClientRect().right > width + 1)
    .slice(0, 5).map(part => part.outerHTML.slice(0, 120))"""

pytestmark = pytest.mark.skipif(
    not Path(CHROMIUM).exists(), reason="chromium is not installed: no story in a real browser"
)


@contextmanager
def _browser() -> Iterator[Any]:
    with playwright.sync_playwright() as machine:
        browser = machine.chromium.launch(executable_path=CHROMIUM, args=list(FLAGS))
        try:
            yield browser
        finally:
            browser.close()


class Visitor:
    """One person at one browser, who notices what the console says and pages that are wider than the window."""

    def __init__(self, browser: Any, origin: str, width: int) -> None:
        self.context = browser.new_context(viewport={"width": width, "height": 900 if width > 600 else 844})
        self.page = self.context.new_page()
        self.page.set_default_timeout(TIMEOUT_MS)
        self.origin, self.width = origin, width
        self.complaints: list[str] = []
        self.page.on("console", lambda message: self.complaints.append(message.text))
        self.page.on("pageerror", lambda error: self.complaints.append(str(error)))

    def go(self, path: str) -> None:
        self.page.goto(f"{self.origin}{path}")
        self.look()

    def follow(self, selector: str) -> None:
        """Click what leads to another page, and be there."""
        with self.page.expect_navigation():
            self.page.click(selector)

    def look(self) -> None:
        """The page fits its window, passes axe when that is at hand, and its console is silent."""
        self.page.wait_for_load_state("load")
        if self.page.evaluate("document.documentElement.scrollWidth") > self.width:
            raise AssertionError((self.page.url, self.page.evaluate(WIDER, self.width)))
        axe = os.environ.get("IONWITNESS_AXE")
        if axe:
            found = _run_axe(self.page, Path(axe))
            assert not found, (self.page.url, found)
        assert not self.complaints, self.complaints

    def text(self) -> str:
        return str(self.page.inner_text("main"))


def _run_axe(page: Any, script: Path) -> list[str]:
    """Violations of axe-core that are serious or critical; run in an isolated world, past the page's own policy."""
    session = page.context.new_cdp_session(page)
    tree = session.send("Page.getFrameTree")
    world = session.send("Page.createIsolatedWorld", {"frameId": tree["frameTree"]["frame"]["id"], "worldName": "axe"})
    where = {"contextId": world["executionContextId"]}
    session.send("Runtime.evaluate", {"expression": script.read_text(), **where})
    told = session.send(
        "Runtime.evaluate",
        {"expression": "axe.run().then(r => r.violations.map(v => [v.impact, v.id, v.nodes.map(n => n.html).slice(0, 3)]))",
         "awaitPromise": True, "returnByValue": True, **where},
    )  # fmt: skip
    session.detach()
    return [str(item) for item in told["result"]["value"] if item[0] in ("serious", "critical")]


def _wait_for_work(visitor: Visitor) -> None:
    visitor.page.wait_for_selector("#jobs:not([data-busy])", state="attached")


@pytest.mark.slow
@pytest.mark.parametrize("width", WIDTHS)
def test_the_whole_story(bench: Bench, width: int) -> None:
    set_person(bench.desk.case, "Eve", "reviewer", PASSWORD, bench.desk.now())
    with _browser() as browser:
        ada = Visitor(browser, bench.origin, width)
        ada.page.goto(_fresh_link(bench))
        assert "Nothing on the bench yet" in ada.text()
        ada.page.set_input_files("input[name=files]", [str(DEMO / name) for name in UNKNOWNS])
        ada.follow("form.drop >> button:has-text('Identify')")
        _wait_for_work(ada)
        ada.look()
        ada.follow("table.work a:has-text('peak 5')")
        ada.look()
        text = ada.text()
        for words in ("limonene", "molecular ion", "agrees", "log-odds", "Why not"):
            assert words in text
        assert ada.page.locator("svg.plot").first.is_visible()

        ada.page.fill("input[name=why_not]", "alpha-terpinene")
        ada.follow("button:has-text('Explain')")
        assert "alpha-terpinene" in ada.page.inner_text("#why-not")
        ada.look()

        ada.page.fill("textarea[name=note]", "fits the smell of the drum")
        ada.follow("button:has-text('Keep the decision')")
        assert "Accepted" in ada.page.inner_text("#decide") and "Ada" in ada.page.inner_text("#decide")
        ada.look()

        ada.follow("a:has-text('Propose this spectrum as a standard')")
        assert ada.page.input_value("#propose input[name=name]") == "limonene"
        ada.page.fill("#propose input[name=supplier]", "an invented supplier")
        ada.page.fill("#propose input[name=lot]", "L-7")
        ada.follow("#propose >> button:has-text('Propose')")
        assert "a second person must review it" in ada.text()
        ada.look()

        eve = Visitor(browser, bench.origin, width)
        eve.go("/sign-in")
        eve.page.fill("input[name=name]", "Eve")
        eve.page.fill("input[name=password]", PASSWORD)
        eve.follow("button:has-text('Sign in')")
        eve.go("/standards")
        eve.page.fill("article.proposal textarea[name=reason]", "lot sheet seen")
        eve.follow("article.proposal >> button:has-text('Accept')")
        assert "OWN-000001" in eve.text() and "No standard waits for review" in eve.text()
        eve.look()

        ada.go("/")
        ada.follow("table.work a:has-text('peak 5')")
        ada.follow("button:has-text('Identify again')")
        assert "own standard" in ada.text()
        ada.look()

        eve.follow("a:has-text('limonene')")
        eve.page.fill("textarea[name=reason]", "lot was mixed up")
        eve.follow("button:has-text('Withdraw the entry')")
        assert "not found by searches" in eve.text()
        eve.look()

        ada.page.reload()
        assert "“withdrawn” now" in ada.text()
        for path in ("/", "/library?ion=93", "/follow-up", "/trail", "/report", "/standards"):
            ada.go(path)
        ada.go("/report")
        assert "fits the smell of the drum" in ada.text()


def _fresh_link(bench: Bench) -> str:
    """A one-time link; the bench has used its own."""
    return f"{bench.origin}/open/{bench.sessions.new_link(Person('Ada', 'reviewer'))}"


@pytest.mark.slow
def test_keys_lead_everywhere_and_can_be_switched_off(bench: Bench) -> None:
    bench.upload_demo(3)
    with _browser() as browser:
        visitor = Visitor(browser, bench.origin, 1280)
        visitor.page.goto(_fresh_link(bench))
        keyboard = visitor.page.keyboard
        keyboard.press("j")
        keyboard.press("j")
        with visitor.page.expect_navigation(url="**/queries/*"):
            keyboard.press("Enter")
        first = visitor.page.url
        with visitor.page.expect_navigation():
            keyboard.press("n")
        assert visitor.page.url != first
        keyboard.press("d")
        assert visitor.page.evaluate("document.activeElement.id") == "decide-head"
        for key, path in (("l", "/library"), ("s", "/standards"), ("f", "/follow-up"), ("t", "/trail"), ("w", "/")):
            keyboard.press("g")
            with visitor.page.expect_navigation(url=f"{bench.origin}{path}"):
                keyboard.press(key)
        keyboard.press("/")
        assert visitor.page.evaluate("document.activeElement.name") == "text"
        visitor.page.click("footer summary")
        visitor.page.uncheck("#single-keys")
        visitor.page.evaluate("document.activeElement.blur()")
        keyboard.press("g")
        keyboard.press("l")
        assert visitor.page.url == f"{bench.origin}/"
        assert not visitor.complaints


@pytest.mark.slow
def test_dropped_files_are_taken_and_pages_work_without_scripts(bench: Bench) -> None:
    with _browser() as browser:
        visitor = Visitor(browser, bench.origin, 1280)
        visitor.page.goto(_fresh_link(bench))
        visitor.page.evaluate(
            """() => { const data = new DataTransfer();
                data.items.add(new File(["43 100\\n58 38\\n15 34\\n"], "dropped.csv"));
                dispatchEvent(new DragEvent("drop", { dataTransfer: data, cancelable: true, bubbles: true })); }"""
        )
        visitor.page.wait_for_url("**/?said=received")
        _wait_for_work(visitor)
        assert "dropped.csv" in visitor.text()
        bare = browser.new_context(java_script_enabled=False)
        page = bare.new_page()
        page.set_default_timeout(TIMEOUT_MS)
        page.goto(_fresh_link(bench))
        page.fill("textarea[name=peaks]", "43 100, 58 30, 15 20")
        page.click("button:has-text('Identify the list')")
        page.wait_for_url("**/?said=received")
        bench.wait()
        page.goto(bench.origin)
        page.goto(f"{bench.origin}/queries/1")
        page.check("input[value=reject]")
        page.fill("textarea[name=note]", "only a test")
        with page.expect_navigation():
            page.click("button:has-text('Keep the decision')")
        assert "Rejected" in page.inner_text("#decide")


@pytest.mark.slow
def test_a_page_of_another_port_can_neither_frame_nor_send(bench: Bench, tmp_path: Path) -> None:
    import http.server
    import threading

    target = bench.origin
    (tmp_path / "index.html").write_text(
        f"<iframe src='{target}/'></iframe><form method=post action='{target}/pasted'>"
        "<input name=peaks value='43 100'></form><script>document.forms[0].submit()</script>"
    )

    class Quiet(http.server.SimpleHTTPRequestHandler):
        def __init__(self, *args: Any, **kwargs: Any) -> None:
            super().__init__(*args, directory=str(tmp_path), **kwargs)

        def log_message(self, *args: Any) -> None:
            pass

    with http.server.ThreadingHTTPServer(("127.0.0.1", 0), Quiet) as other, _browser() as browser:
        threading.Thread(target=other.serve_forever, daemon=True).start()
        visitor = Visitor(browser, bench.origin, 1280)
        visitor.page.goto(_fresh_link(bench))
        visitor.page.goto(f"http://127.0.0.1:{other.server_address[1]}/index.html")
        visitor.page.wait_for_url(f"{target}/pasted")
        assert "our own pages only" in visitor.page.inner_text("body")
        other.shutdown()
    assert bench.client.get("/api/work-list").json()["jobs"] == []
