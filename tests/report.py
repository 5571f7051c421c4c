# SPDX-License-Identifier: GPL-3.0-or-later
"""Looks at a report: the file as written and the document as a browser built it.

usage: report.py REPORT.html DOM.html
Exit 1 with one line a fault: a heading is missing, something would be loaded from outside, a link
within the page leads nowhere, an id is used twice, a picture has no text, or a number is not a number.
"""
import re
import sys
from html.parser import HTMLParser

VOID = set("area base br col embed hr img input link meta source track wbr".split())
# attributes that make a browser fetch; a plain link (a href) is only followed by a person
FETCHES = {"script": ["src"], "img": ["src", "srcset"], "link": ["href"], "iframe": ["src"], "object": ["data"],
           "embed": ["src"], "source": ["src"], "video": ["src"], "audio": ["src"], "image": ["href", "xlink:href"],
           "use": ["href", "xlink:href"]}


class Page(HTMLParser):
    def __init__(self):
        super().__init__()
        self.faults, self.ids, self.links, self.headings, self.text = [], [], [], [], []
        self.open, self.tables, self.language = [], 0, ""

    def handle_starttag(self, tag, attributes):
        has = dict(attributes)
        if "id" in has:
            self.ids.append(has["id"])
        if tag == "a" and (has.get("href") or "").startswith("#"):
            self.links.append(has["href"][1:])
        for name in FETCHES.get(tag, []):
            target = has.get(name) or ""
            if target and not target.startswith(("data:", "#")):
                self.faults.append(f"<{tag} {name}={target[:60]!r}> loads a file; a report is one file")
        if tag == "img" and "alt" not in has:
            self.faults.append("an image has no alt text")
        if tag == "html":
            self.language = has.get("lang", "")
        if tag == "table":
            self.tables += 1
        if tag in ("h1", "h2", "h3"):
            self.headings.append([tag, ""])
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if tag in self.open:
            while self.open.pop() != tag:
                pass

    def handle_data(self, data):
        inside = set(self.open)
        if inside & {"script", "style"}:
            if re.search(r"url\(\s*['\"]?(?!data:|#)[a-z]+:", data) or re.search(r"@import", data):
                self.faults.append("a style or script names something outside")
            return
        if self.open and self.open[-1] != "svg":
            self.text.append(data)
        if inside & {"h1", "h2", "h3"} and self.headings:
            self.headings[-1][1] += data


def main():
    source = open(sys.argv[1], encoding="utf-8").read()
    built = open(sys.argv[2], encoding="utf-8").read()
    faults = []
    for name, text in (("file", source), ("page", built)):
        page = Page()
        page.feed(text)
        faults += [f"{name}: {fault}" for fault in page.faults]
        faults += [f"{name}: id {i!r} is used {page.ids.count(i)} times" for i in sorted(set(page.ids))
                   if page.ids.count(i) > 1]
        faults += [f"{name}: the link #{link} leads nowhere" for link in sorted(set(page.links))
                   if link and link not in page.ids]
    # the page as a person sees it, scripts run
    if [tag for tag, text in page.headings if text.strip()].count("h1") != 1:
        faults.append("page: there must be one h1 with text")
    if sum(tag == "h2" and bool(text.strip()) for tag, text in page.headings) < 2:
        faults.append("page: fewer than two sections have headings")
    if page.tables < 1:
        faults.append("page: there is no table of results")
    if "<svg" not in built and "<canvas" not in built and "data:image" not in built:
        faults.append("page: there is no figure")
    if not page.language:
        faults.append("page: the language is not declared")
    words = " ".join(page.text)
    for wrong in (r"\bnan\b", r"\binf\b", r"\bNaN\b", r"\bundefined\b", r"\[object Object\]", r"\btable: 0x", r"\bnil\b"):
        found = re.search(r".{0,30}" + wrong + r".{0,30}", words)
        if found:
            faults.append(f"page: reads {found.group(0).strip()!r}")
    for fault in faults:
        print(fault)
    sys.exit(1 if faults else 0)


main()
