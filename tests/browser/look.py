#!/usr/bin/env python3
"""Opens a report in headless Chromium at phone, tablet and desktop width and checks what a person would trip over.

The page must render, must not scroll sideways, must ask for nothing outside, and every link of its contents must lead somewhere.
Only the standard library is used; the browser is driven by its own command line.
"""
import html.parser, pathlib, re, struct, subprocess, sys, tempfile

page = pathlib.Path(sys.argv[1]).resolve()
text = page.read_text(encoding="utf-8")


class Seen(html.parser.HTMLParser):
    def __init__(self):
        super().__init__()
        self.ids, self.links, self.headings, self.images, self.open = [], [], [], 0, []

    def handle_starttag(self, tag, attributes):
        attributes = dict(attributes)
        if "id" in attributes:
            self.ids.append(attributes["id"])
        if tag == "a":
            self.links.append(attributes.get("href", ""))
        if re.fullmatch("h[1-6]", tag):
            self.headings.append(int(tag[1]))
        if tag == "svg":
            self.images += 1
            assert attributes.get("role") == "img" and attributes.get("aria-labelledby"), "a figure has no description"
        assert not any(name.startswith("on") for name in attributes), f"an event handler on <{tag}>"
        assert tag not in ("script", "iframe", "object", "embed", "link", "form", "img"), f"<{tag}> in the report"


seen = Seen()
seen.feed(text)
assert len(seen.ids) == len(set(seen.ids)), "an id stands twice"
for link in seen.links:
    assert link.startswith("#") and link[1:] in seen.ids, f"{link} leads nowhere"
assert seen.headings.count(1) == 1 and seen.headings[0] == 1, "one main heading, first"
assert all(b - a <= 1 for a, b in zip(seen.headings, seen.headings[1:])), "a level of headings is skipped"
assert seen.images >= 1, "no figure"

flags = ["--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
         "--disable-component-update", "--disable-sync", "--hide-scrollbars"]
# The page may run no script, so a frame round it measures: it is read at each width from outside.
for width in (360, 768, 1440):
    with tempfile.TemporaryDirectory() as folder:
        folder = pathlib.Path(folder)
        probe = folder / "probe.html"
        probe.write_text(
            f'<!DOCTYPE html><iframe id="f" src="report.html" style="border:0;width:{width}px;height:900px"></iframe><pre id="o"></pre>'
            "<script>f.onload=()=>{const d=f.contentDocument,m=d.documentElement;"
            "o.textContent='wide='+m.scrollWidth+' tall='+m.scrollHeight+' text='+d.body.innerText.length}</script>")
        (folder / "report.html").write_text(text, encoding="utf-8")
        run = subprocess.run(["chromium", *flags, f"--user-data-dir={folder}/profile", "--allow-file-access-from-files", "--virtual-time-budget=4000",
                              "--dump-dom", probe.as_uri()], capture_output=True, text=True, timeout=120)
        found = re.search(r"wide=(\d+) tall=(\d+) text=(\d+)", run.stdout)
        assert found, f"the browser did not show the report: {run.stdout[-400:]} {run.stderr[-400:]}"
        wide, tall, letters = map(int, found.groups())
        assert wide <= width, f"at {width} px the page is {wide} px wide: it scrolls sideways"
        assert letters > 2000 and tall > 1000, f"at {width} px hardly anything is shown"
        shot = folder / "shot.png"
        subprocess.run(["chromium", *flags, f"--user-data-dir={folder}/profile2", f"--screenshot={shot}", f"--window-size={max(width, 500)},1200", page.as_uri()],
                       capture_output=True, timeout=120)
        assert shot.exists() and struct.unpack(">I", shot.read_bytes()[16:20])[0] >= width, "no picture"
        print(f"{width} px: {wide} px wide, {tall} px tall")
print("report: links, headings, figures and widths hold")
