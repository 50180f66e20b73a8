"""Pages of reports as tests read them."""

from html.parser import HTMLParser

VOID = {"meta", "img", "br", "link", "input", "hr"}


class Page(HTMLParser):
    """What a page says: its elements, and the text of each section. Every element must be closed in order."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.elements, self.open, self.texts, self.section = [], [], {}, ""
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)
        if tag == "section":
            self.section = dict(attrs)["id"]
        if tag in ("td", "th", "dt", "p", "li"):
            self.texts[self.section] = self.texts.get(self.section, "") + "\n"

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        plain = data.replace("\N{NO-BREAK SPACE}", " ")
        self.texts[self.section] = self.texts.get(self.section, "") + plain

    def named(self, tag):
        return [attributes for name, attributes in self.elements if name == tag]
