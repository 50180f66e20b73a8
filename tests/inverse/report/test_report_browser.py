"""The report in a real browser: headless Chromium, driven over two pipes by the DevTools protocol.

Nothing of ours draws or measures here: what is decoded, how wide the page is and how many sheets it prints on
are the browser's own words.
"""

import base64
import fcntl
import json
import os
import re
import select
import shutil
import subprocess
import sys
import time

import pytest

from finback.report import figures, html

CHROMIUM = shutil.which("chromium")
OPTIONS = (
    *("--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"),
    *("--disable-background-networking", "--disable-component-update", "--disable-sync"),
    "--remote-debugging-pipe",
)
LAUNCH = """
import os, sys
os.dup2(int(sys.argv[1]), 3)
os.dup2(int(sys.argv[2]), 4)
os.execv(sys.argv[3], sys.argv[3:])
"""
PATIENCE = 60.0  # seconds for any one answer
A4 = {"paperWidth": 8.27, "paperHeight": 11.69, "preferCSSPageSize": True, "printBackground": False}

pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="Debian's chromium is not installed")


class Browser:
    """One headless Chromium with one page; `events` are what it reported by itself."""

    def __init__(self, profile):
        to_browser, self.commands = os.pipe()
        self.answers, from_browser = os.pipe()
        handed = [fcntl.fcntl(end, fcntl.F_DUPFD, 10) for end in (to_browser, from_browser)]
        started = [CHROMIUM, *OPTIONS, f"--user-data-dir={profile}"]
        self.process = subprocess.Popen(
            [sys.executable, "-c", LAUNCH, *map(str, handed), *started],
            pass_fds=handed,
            stderr=subprocess.DEVNULL,
        )
        for end in (to_browser, from_browser, *handed):
            os.close(end)
        self.events, self.number, self.unread, self.session = [], 0, b"", None
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        self.session = self.call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            self.call(f"{domain}.enable")

    def call(self, method, **parameters):
        self.number += 1
        message = {"id": self.number, "method": method, "params": parameters}
        if self.session:
            message["sessionId"] = self.session
        os.write(self.commands, json.dumps(message).encode() + b"\0")
        while (answer := self.receive()).get("id") != self.number:
            self.events.append(answer)
        assert "error" not in answer, answer
        return answer["result"]

    def receive(self):
        deadline = time.monotonic() + PATIENCE
        while b"\0" not in self.unread:
            ready, _, _ = select.select([self.answers], [], [], max(0.0, deadline - time.monotonic()))
            assert ready, "Chromium gave no answer"
            data = os.read(self.answers, 1 << 20)
            assert data, "Chromium ended"
            self.unread += data
        message, _, self.unread = self.unread.partition(b"\0")
        return json.loads(message)

    def show(self, file, width):
        """Open a file at a width in CSS pixels, and return once it is loaded and every picture decoded."""
        self.call(
            "Emulation.setDeviceMetricsOverride",
            width=width,
            height=900,
            deviceScaleFactor=1,
            mobile=width < 600,
        )
        self.events.clear()
        self.call("Page.navigate", url=file.as_uri())
        while not self.seen("Page.loadEventFired"):
            self.events.append(self.receive())
        self.evaluate(
            "Promise.all([...document.images].map(image => image.decode().catch(() => null))).then(() => 1)"
        )

    def evaluate(self, expression):
        found = self.call("Runtime.evaluate", expression=expression, returnByValue=True, awaitPromise=True)
        assert "exceptionDetails" not in found, found
        return found["result"].get("value")

    def seen(self, method):
        return [event["params"] for event in self.events if event.get("method") == method]

    def close(self):
        self.session = None
        try:
            self.call("Browser.close")
        except AssertionError:  # it may end before it answers
            self.process.terminate()
        self.process.wait(PATIENCE)
        os.close(self.commands)
        os.close(self.answers)


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    found = Browser(tmp_path_factory.mktemp("chromium"))
    yield found
    found.close()


@pytest.fixture(scope="module", params=["pin", "rod", "hostile", "bench"])
def report(request, pages, tmp_path_factory):
    file = tmp_path_factory.mktemp(request.param) / "report.html"
    file.write_text(pages[request.param], encoding="utf-8")
    return file


PICTURES = """[...document.images].map(image => ({
    natural: image.naturalWidth, width: image.getBoundingClientRect().width,
    height: image.getBoundingClientRect().height, right: image.getBoundingClientRect().right,
    visible: image.checkVisibility()}))"""


@pytest.mark.parametrize("width", [1280, 390])
def test_every_picture_is_shown_and_the_page_fits_its_width(browser, report, width):
    browser.show(report, width)

    pictures = browser.evaluate(PICTURES)
    assert len(pictures) == (3 if report.parent.name.startswith("rod") else 5)
    for picture in pictures:
        assert picture["natural"] > 0, "not decoded"
        assert picture["visible"]
        assert picture["width"] > 250
        assert picture["height"] > 50
        assert picture["right"] <= width
    assert browser.evaluate("innerWidth") == width
    assert browser.evaluate("document.documentElement.scrollWidth") <= width


@pytest.mark.parametrize("width", [1280, 390])
def test_nothing_is_logged_and_nothing_is_fetched(browser, report, width):
    browser.show(report, width)

    assert browser.seen("Log.entryAdded") == []
    assert browser.seen("Runtime.consoleAPICalled") == []
    assert browser.seen("Runtime.exceptionThrown") == []
    assert browser.seen("Page.javascriptDialogOpening") == []
    requests = {event["request"]["url"] for event in browser.seen("Network.requestWillBeSent")}
    outside = {url for url in requests if not url.startswith("data:image/svg+xml;base64,")}
    assert outside == {report.as_uri()}


def test_the_answer_is_in_the_first_screen(browser, report):
    browser.show(report, 1280)

    assert browser.evaluate("document.querySelector('#answer').getBoundingClientRect().bottom") <= 900


def sheets(browser, file):
    """Return how many A4 sheets a file prints on."""
    browser.show(file, 1280)
    printed = base64.b64decode(browser.call("Page.printToPDF", **A4)["data"])
    boxes = re.findall(rb"/MediaBox\s*\[([^\]]*)\]", printed)
    sizes = {tuple(round(float(x)) for x in box.split()) for box in boxes}
    assert sizes <= {(0, 0, 595, 842), (0, 0, 596, 842)}  # A4 in points, ISO 216
    return len(re.findall(rb"/Type\s*/Page\b", printed))


def test_it_prints_on_at_most_five_a4_pages(browser, report):
    assert 1 <= sheets(browser, report) <= 5


def test_forty_sensors_still_print_on_five_a4_pages(browser, crowded_estimate, tmp_path):
    file = tmp_path / "report.html"
    file.write_text(html.render(crowded_estimate, figures.draw(crowded_estimate)), encoding="utf-8")
    assert 1 <= sheets(browser, file) <= 5
