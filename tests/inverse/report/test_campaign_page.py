"""The page of a campaign: self-contained, harmless whatever runs are called, small however many they are."""

import re
from html.parser import HTMLParser
from pathlib import Path

import pytest
from campaigns import NOTHING, Here, compute, rows, text, write

from finback.campaign_block import Answer, Block, Record

NASTY = '<script>alert("1")</script>'


class Page(HTMLParser):
    """The identities, links and sources of a page, and its open tags."""

    def __init__(self, content: str) -> None:
        super().__init__()
        self.ids: list[str] = []
        self.links: list[str] = []
        self.sources: list[str] = []
        self.tags: set[str] = set()
        self.feed(content)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        for name, value in attrs:
            if name == "id":
                self.ids.append(value or "")
            elif name == "href":
                self.links.append(value or "")
            elif name == "src":
                self.sources.append(value or "")


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> str:
    """The page of a campaign with a sensor that is off, a run of a dangerous name, and rows that fail."""
    folder = tmp_path_factory.mktemp("page")
    body = [list(row) for row in rows(14)]
    for row in body:
        row[3] = f"{float(row[3]) + 3:.3f}"  # T3
    body[5][0] = NASTY
    body[6][1] = "ERR"
    body[7][1] = "---x"
    compute(write(folder, readings=text(body)), folder / "out")
    return (folder / "out" / "report.html").read_text(encoding="utf-8")


def test_nothing_is_loaded_and_nothing_runs(page: str) -> None:
    parsed = Page(page)
    assert "script" not in parsed.tags
    assert all(source.startswith("data:image/svg+xml;base64,") for source in parsed.sources)
    assert len(parsed.sources) == 3  # h against the speed; h and k against the order; no run tells a joint
    assert not re.search(r"@import|url\(", page)


def test_every_link_leads_to_a_place_on_the_page(page: str) -> None:
    parsed = Page(page)
    assert parsed.links
    assert {link.removeprefix("#") for link in parsed.links} <= set(parsed.ids)
    assert len(parsed.ids) == len(set(parsed.ids))


def test_names_are_shown_and_do_nothing(page: str) -> None:
    assert NASTY not in page
    assert "&lt;script&gt;" in page


def test_what_went_wrong_is_told(page: str) -> None:
    assert re.search(r"Found to be wrong in many runs: T3 \(1[0-2] of 12\)", page)
    assert "Off in the same direction run after run: T3" in page
    assert re.search(
        r"column T1: &#34;…&#34; is no number; write a number or leave it empty</td><td class=\"n\">2<", page
    )
    assert "<code>sensor-outlier</code>" in page
    assert "An estimate is no certificate" in page


def many(block: Block) -> Answer:
    """Answer each run with a k and a finding, without computing anything."""
    found = NOTHING.replace('"quantities":{}', '"quantities":{"h":[40,1,38,42],"k":[%d,4,160,178]}').replace(
        '"findings":[]', '"findings":[["misfit","caution",null,"It does not fit."]]'
    )
    return Answer(tuple(Record(key, found % (165 + key[0] % 9)) for key, _, _ in block.runs), 1.0)


def test_a_page_of_many_runs_is_no_larger(tmp_path: Path) -> None:
    size = {}
    for count in (2_000, 8_000):
        body = [(f"run {i}", *rows(1)[0][1:7], str(i % 50)) for i in range(count)]
        out = tmp_path / str(count)
        compute(write(tmp_path, readings=text(body)), out, Here(many), block=400)
        content = (out / "report.html").read_text(encoding="utf-8")
        assert f"The first 100 of {count:,} runs" in content
        size[count] = len(content)
    assert size[8_000] < 1.1 * size[2_000] < 1_000_000
