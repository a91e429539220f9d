#!/usr/bin/env python3
"""The report in a real browser: what moves when the slider, a point or the arrow keys are used; paper; markup in ids;
nothing fetched, nothing logged. Reports come from $LW_BUILD/tests/page/write_samples and from the demo. TAP on standard output.

    test_report.py [FOLDER]     keeps pages and screenshots in FOLDER
"""
import os
import subprocess
import sys
import tempfile

sys.path.insert(0, os.path.dirname(os.path.abspath(__file__)))
from browser import LEFT, RIGHT, Browser

MOST_BYTES = 40_000_000
STATE = """
const text = id => { const n = document.getElementById(id); return n ? n.textContent : null; };
const canvas = document.querySelector('#explore .map-panel canvas');
const bars = [...document.querySelectorAll('#explore .bars rect')].map(n => n.getAttribute('height')).join();
let map = null;
if (canvas) {
    const d = canvas.getContext('2d').getImageData(0, 0, canvas.width, canvas.height).data;
    map = 0;
    for (let i = 0; i < d.length; i++) map = (map * 31 + d[i]) % 2147483647;
} else map = [...document.querySelectorAll('#explore .dots')].map(n => n.getAttribute('d')).join();
return {map, bars, selected: document.documentElement.dataset.selected, command: text('solve-command'), slider: text('damping-value'),
    misfit: text('figure-misfit'), size: text('figure-size'), fit: text('figure-chi-square'), rms: text('figure-rms'),
    reduction: text('figure-reduction'), effective: text('figure-effective'),
    marker: document.querySelector('#curve .marker circle').getAttribute('cx')};
"""
PAINTED = """
const done = arguments[1], s = document.getElementById('damping-slider'), start = performance.now();
s.value = arguments[0];
s.dispatchEvent(new Event('input', {bubbles: true}));
requestAnimationFrame(() => setTimeout(() => done(performance.now() - start)));
"""
FOLLOWS = ["map", "bars", "selected", "command", "slider", "misfit", "size", "fit", "effective", "marker"]


class Tap:
    count = failed = 0

    def check(self, good, what, detail=""):
        self.count += 1
        self.failed += not good
        print(f"{'ok' if good else 'not ok'} {self.count} - {what}" + (f"\n# {detail}" if not good and detail else ""), flush=True)

    def note(self, text):
        print(f"# {text}", flush=True)


def slide(browser, index):
    browser.run("const s = document.getElementById('damping-slider'); s.value = arguments[0];"
                "s.dispatchEvent(new Event('input', {bubbles: true}));", index)


def check_quiet(tap, browser, name):
    asked, complaints = browser.requests(), browser.complaints()
    tap.check(not asked, f"{name}: no request leaves the page", asked)
    tap.check(not complaints, f"{name}: nothing is logged as an error", complaints)


def check_slider(tap, browser, name):
    first = browser.run(STATE)
    slide(browser, 30)
    moved = browser.run(STATE)
    stuck = [key for key in FOLLOWS if first[key] == moved[key]]
    tap.check(moved["selected"] == "30" and not stuck, f"{name}: the slider moves everything", f"unchanged: {stuck}")
    tap.check(moved["command"].startswith("leastwise solve ") and " --damping " in moved["command"]
              and "--dampings" not in moved["command"], f"{name}: the command solves at that damping", moved["command"])
    browser.click("#curve .point", 8)
    clicked = browser.run(STATE)
    stuck = [key for key in FOLLOWS if clicked[key] == moved[key]]
    tap.check(clicked["selected"] == browser.run("return document.querySelectorAll('#curve .point')[8].dataset.k") and not stuck,
              f"{name}: a click on a point moves everything", f"unchanged: {stuck}")
    browser.run("document.activeElement.blur()")
    browser.keys(RIGHT, RIGHT, LEFT)
    pressed = browser.run(STATE)
    tap.check(int(pressed["selected"]) == int(clicked["selected"]) + 1 and pressed["map"] != clicked["map"]
              and pressed["command"] != clicked["command"], f"{name}: arrow keys move it", pressed["selected"])
    browser.click("#explore .slider button")
    back = browser.run(STATE)
    tap.check(back == first, f"{name}: back to the answer gives the first state again")


def check_hover(tap, browser, name):
    browser.hover("#explore .map-panel .catch", 0.5, 0.5)
    text = browser.run("const h = document.getElementById('hover'); return h.hidden ? '' : h.textContent")
    tap.check("estimate" in text, f"{name}: a cell shows its values under the pointer", text)
    browser.run("document.querySelector('#explore .map-panel .catch').dispatchEvent(new MouseEvent('click', {bubbles: true,"
                "clientX: arguments[0], clientY: arguments[1]}))", *browser.hover("#explore .map-panel .catch", 0.5, 0.5))
    tap.check(browser.run("return document.querySelectorAll('.picked .line').length") == 1, f"{name}: a picked cell shows its history")


def check_text(tap, browser, name):
    bare = browser.run("return [...document.querySelectorAll('svg[role=img]')].filter(n => !n.getAttribute('aria-label')).length")
    tap.check(bare == 0, f"{name}: every chart has a label for screen readers")
    unnamed = browser.run("return [...document.querySelectorAll('figure')].filter(n => !n.querySelector('.figure-text').textContent.trim()).length")
    tap.check(unnamed == 0, f"{name}: every figure has its sentence")


def check_wide(tap, browser, name, folder):
    for width in (1280, 400):
        browser.size(width, 900)
        over = browser.run("return document.documentElement.scrollWidth - document.documentElement.clientWidth")
        path = os.path.join(folder, f"{name}-{width}.png")
        browser.screenshot(path, whole=True)
        tap.check(over <= 0 and os.path.getsize(path) > 10000, f"{name}: fits a window {width} wide", f"{over} pixels too wide")
    browser.size(1280, 900)


def check_paper(tap, browser, name, folder):
    browser.run("window.vectors = 0;"
                "window.addEventListener('beforeprint', () => { window.vectors = document.querySelectorAll('.vector-cells path').length; })")
    pdf = browser.print_pdf()
    with open(os.path.join(folder, f"{name}.pdf"), "wb") as file:
        file.write(pdf)
    tap.check(pdf.startswith(b"%PDF-") and len(pdf) > 20000, f"{name}: prints to PDF")
    maps = browser.run("return document.querySelectorAll('.map-panel').length")
    tap.check(maps == 0 or browser.run("return window.vectors") >= maps, f"{name}: maps are printed as vectors")
    left = browser.run("return document.querySelectorAll('.vector-cells').length")
    tap.check(left == 0, f"{name}: the screen is as before afterwards")


def check_sweep(tap, folder, name, path):
    browser = Browser()
    try:
        browser.open(path)
        check_slider(tap, browser, name)
        if browser.run("return Boolean(document.querySelector('#explore .map-panel'))"):
            check_hover(tap, browser, name)
        check_text(tap, browser, name)
        check_paper(tap, browser, name, folder)
        check_wide(tap, browser, name, folder)
        check_quiet(tap, browser, name)
    finally:
        browser.close()


def check_network(tap, folder, name, path, hostile=False):
    browser = Browser()
    try:
        browser.open(path)
        tap.check(browser.run("return document.querySelectorAll('#model tbody tr').length") > 0, f"{name}: estimates are listed")
        tap.check(browser.run("return document.querySelectorAll('#reliability tbody tr').length") > 0, f"{name}: readings are listed")
        if hostile:
            tap.check(browser.run("return window.broken === undefined && !document.querySelector('#report img')"), f"{name}: markup in ids does no harm")
            tap.check(browser.run("return [...document.querySelectorAll('th')].some(n => n.textContent.startsWith('</script>'))"),
                      f"{name}: such ids are shown as they are")
            tap.check(browser.run("return document.querySelectorAll('#plan .drawing .join.none').length") == 1, f"{name}: a line without redundancy is told apart")
            tap.check(browser.run("return document.querySelectorAll('#plan .suspect-cross').length") > 0, f"{name}: suspects are marked on the plan")
        check_text(tap, browser, name)
        check_paper(tap, browser, name, folder)
        check_wide(tap, browser, name, folder)
        check_quiet(tap, browser, name)
    finally:
        browser.close()


def check_plain(tap, folder, name, path, wanted):
    """Pages with less to show: the sections named are there, and nothing fails."""
    browser = Browser()
    try:
        browser.open(path)
        there = browser.run("return [...document.querySelectorAll('main > section')].map(n => n.id)")
        missing = [section for section in wanted if section not in there]
        tap.check(not missing, f"{name}: shows {', '.join(wanted)}", f"missing: {missing}")
        if "explore" in wanted:
            browser.keys(RIGHT)
            tap.check(browser.run("return document.getElementById('solve-command').textContent").startswith("leastwise solve"),
                      f"{name}: the command is there")
        check_text(tap, browser, name)
        check_paper(tap, browser, name, folder)
        check_quiet(tap, browser, name)
    finally:
        browser.close()


def measure_large(tap, path):
    """100 000 cells and 60 dampings: size asserted, times told."""
    size = os.path.getsize(path)
    tap.check(size < MOST_BYTES, "large: under 40 MB", f"{size} bytes")
    browser = Browser()
    try:
        browser.open(path)
        cells = browser.run("return JSON.parse(document.getElementById('run-data').textContent).parameters.count")
        times = []
        for again in range(2):
            for index in range(0, 60, 3):
                painted = browser.run_async(PAINTED, index)
                times.append((again, float(browser.run("return document.documentElement.dataset.redraw")), painted))
        for again, what in enumerate(("first look", "again")):
            for column, until in ((1, "until drawn"), (2, "until the next frame")):
                chosen = sorted(t[column] for t in times if t[0] == again)
                tap.note(f"{cells} cells, {size / 1e6:.1f} MB, {what}, {until}: median {chosen[len(chosen) // 2]:.1f} ms, longest {chosen[-1]:.1f} ms")
        tap.check(browser.run(STATE)["selected"] == "57", "large: the slider follows")
        check_quiet(tap, browser, "large")
    finally:
        browser.close()


def demo_reports(folder):
    """(kind, name, path) of every demo problem that can be solved; the program writes each report."""
    demo, program = os.path.join(os.environ.get("LW_SOURCE", "."), "data-demo"), os.environ.get("LEASTWISE", "")
    if not os.access(program, os.X_OK) or not os.path.isdir(demo):
        return
    for name in sorted(os.listdir(demo)):
        problem = os.path.join(demo, name)
        if not os.path.exists(os.path.join(problem, "design.csv")):
            continue
        parameters = os.path.join(problem, "parameters.csv")
        head = ""
        if os.path.exists(parameters):
            with open(parameters, encoding="utf-8") as file:
                head = next((line for line in file if not line.startswith("#")), "")
        command = "sweep" if ",z" in head and "point" not in head else "solve"
        out = os.path.join(folder, f"demo-{name}")
        done = subprocess.run([program, command, problem, "--out", out, "--overwrite", "--quiet"], check=False)
        if done.returncode in (0, 1):
            yield command, f"demo {name}", os.path.join(out, "report.html")


def main():
    tap = Tap()
    with tempfile.TemporaryDirectory(prefix="leastwise-report-") as scratch:
        folder = sys.argv[1] if len(sys.argv) > 1 else scratch
        writer = os.path.join(os.environ.get("LW_BUILD", "."), "tests", "page", "write_samples")
        subprocess.run([writer, folder], check=True)
        check_sweep(tap, folder, "cells", os.path.join(folder, "cells.html"))
        check_sweep(tap, folder, "slices", os.path.join(folder, "slices.html"))
        check_network(tap, folder, "network", os.path.join(folder, "network.html"), hostile=True)
        check_plain(tap, folder, "recovery", os.path.join(folder, "recovery.html"), ["probe", "coverage", "inputs", "cautions"])
        check_plain(tap, folder, "unanswered", os.path.join(folder, "unanswered.html"), ["curve", "criteria", "explore", "inputs"])
        check_plain(tap, folder, "profile", os.path.join(folder, "profile.html"), ["curve", "explore", "residuals", "model"])
        check_plain(tap, folder, "forgotten", os.path.join(folder, "forgotten.html"), ["curve", "explore", "residuals", "model"])
        measure_large(tap, os.path.join(folder, "large.html"))
        for command, name, path in demo_reports(folder):
            (check_sweep if command == "sweep" else check_network)(tap, folder, name, path)
    print(f"1..{tap.count}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
