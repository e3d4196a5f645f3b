"""Opens the report page in a browser: no error, nothing fetched, slider, choice of a polygon, both sizes.

    python check_report.py FOLDER BROWSER

FOLDER holds report.html and polygons.csv of the same run; screenshots are written into it.
"""

import csv
import pathlib
import re
import sys

from playwright.sync_api import sync_playwright

QUIET = [
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync",
]


def number(text):
    return float(text.replace("−", "-"))


def check(page, errors, rows, size):
    clock = page.locator("#clock")
    before = clock.inner_text()
    slider = page.locator("#time")
    slider.focus()
    for _ in range(3):
        page.keyboard.press("ArrowRight")
    assert clock.inner_text() != before, "the slider does not move the time"
    time = clock.inner_text().replace(" UTC", ":00Z").replace(" ", "T")
    checked = 0
    shapes = page.locator("#polygons path.polygon")
    for k in range(0, shapes.count(), 7):
        box = shapes.nth(k).bounding_box()
        name = page.locator("#polygon option").nth(int(shapes.nth(k).get_attribute("data-polygon"))).inner_text()
        name = re.sub(r", [^,]*$", "", name)
        shapes.nth(k).dispatch_event("click")
        shown = page.locator("#now").inner_text()
        row = rows[time, name]
        if row["vorticity"]:
            for quantity in ["vorticity", "divergence"]:
                found = re.search(quantity.capitalize() + r"\s+(\S+) ± (\S+)", shown)
                value, error = number(found[1]), number(found[2])
                assert abs(value - 1e5 * float(row[quantity])) < 0.051, (shown, row)
                assert abs(error - 1e5 * float(row[quantity + "_se"])) < 0.051, (shown, row)
                checked += 1
        else:
            assert "no estimate" in shown, (shown, row)
        assert box["width"] > 0
        assert page.locator("#chosen").get_attribute("d"), "no polygon is marked"
    assert checked > 4, "no polygon with values was clicked"
    assert page.locator("#series0 .line0").get_attribute("d"), "no series is drawn"
    colours = lambda: [shapes.nth(k).evaluate("e => e.style.fill") for k in range(5)]
    divergence = colours()
    page.locator("input[name=quantity][value='0']").check()
    assert colours() != divergence, "the colours do not follow the quantity"
    page.locator("#play").click()
    now = clock.inner_text()
    page.wait_for_function("now => document.getElementById('clock').textContent !== now", arg=now)
    page.locator("#play").click()
    button = page.locator("button[data-micros]").first
    button.click()
    assert page.evaluate("document.documentElement.scrollWidth <= innerWidth"), f"wider than the window at {size}"
    assert not errors, errors


def main():
    folder = pathlib.Path(sys.argv[1]).resolve()
    with open(folder / "polygons.csv", newline="") as file:
        rows = {(row["time"], row["polygon"]): row for row in csv.DictReader(file)}
    size = (folder / "report.html").stat().st_size
    assert size < 5e6, f"{size} bytes"
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=sys.argv[2], args=QUIET)
        for width, height, scheme in [(1280, 800, "light"), (390, 844, "light"), (1280, 800, "dark")]:
            page = browser.new_page(viewport={"width": width, "height": height}, color_scheme=scheme)
            errors = []
            page.on("console", lambda message: errors.append(message.text) if message.type in ("error", "warning") else None)
            page.on("pageerror", lambda error: errors.append(str(error)))
            page.on("request", lambda request: errors.append(request.url) if not request.url.startswith("file:") else None)
            page.goto((folder / "report.html").as_uri())
            page.screenshot(path=folder / f"report-{width}-{scheme}.png")
            check(page, errors, rows, (width, height))
            page.close()
        browser.close()
    print(f"report.html: {size} bytes, three windows without an error")


main()
