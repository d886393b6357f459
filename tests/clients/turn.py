"""Turns the three components of a turntable in a browser, by keys, buttons and pointer.

    python3 turn.py --page PAGE --browser CHROMIUM --pictures FOLDER

PAGE holds one turntable. Also looks at the page with scripts switched off, where three score plots
must stand in its place. Prints what is wrong and exits 1, or prints that it turned.
"""

import argparse
import pathlib
import sys
import tempfile
import time

from browser import start_browser, wait_for

SEEN = "document.querySelector('canvas')?.toDataURL()"
VIEWS = """(() => {
    const views = document.querySelector('[data-views]');
    const shown = getComputedStyle(views).display !== 'none';
    const images = [...views.querySelectorAll('img')];
    return {shown, loaded: images.filter(image => image.complete && image.naturalWidth > 0).length,
            said: images.every(image => image.alt.trim())};
})()"""


def drawn(page):
    """The picture after the next frame."""
    time.sleep(0.3)
    return page.evaluate(SEEN)


def check(page, url, pictures):
    page.call("Page.navigate", url=url)
    wait_for("the canvas", lambda: page.evaluate("!!document.querySelector('canvas')"))
    first = drawn(page)
    page.picture(pictures / "turntable.png")
    views = page.evaluate(VIEWS)
    if views["shown"]:
        yield "the score plots are shown although the script runs"
    page.evaluate("document.querySelector('canvas').focus(), true")
    key = {"key": "ArrowLeft", "code": "ArrowLeft", "windowsVirtualKeyCode": 37}
    page.call("Input.dispatchKeyEvent", type="keyDown", **key)
    page.call("Input.dispatchKeyEvent", type="keyUp", **key)
    turned = drawn(page)
    if turned == first:
        yield "an arrow key does not turn it"
    page.evaluate("document.querySelector('[data-does=Home]').click(), true")
    if drawn(page) != first:
        yield "the button for the first view does not bring it back"
    box = page.evaluate(
        "(b => [b.left, b.top, b.width, b.height])(document.querySelector('canvas')"
        ".getBoundingClientRect())"
    )
    x, y = box[0] + box[2] / 2, box[1] + box[3] / 2
    mouse = {"button": "left", "buttons": 1, "clickCount": 1}
    page.call("Input.dispatchMouseEvent", type="mousePressed", x=x, y=y, **mouse)
    page.call("Input.dispatchMouseEvent", type="mouseMoved", x=x + 60, y=y + 30, **mouse)
    page.call("Input.dispatchMouseEvent", type="mouseReleased", x=x + 60, y=y + 30, **mouse)
    if drawn(page) == first:
        yield "dragging does not turn it"
    # Some unit lies under one of these places, and its name is said.
    said = set()
    for dx in range(-60, 61, 12):
        page.call("Input.dispatchMouseEvent", type="mouseMoved", x=x + dx, y=y)
        said.add(page.evaluate("document.querySelector('[data-said]').textContent"))
    if not any(said):
        yield "no unit under the pointer is named"
    words = page.evaluate("document.querySelector('canvas').getAttribute('aria-label')")
    if not words or "Arrow keys" not in words:
        yield "a screen reader is not told what it is and how it is turned"

    page.call("Emulation.setScriptExecutionDisabled", value=True)
    page.call("Page.navigate", url=url)
    time.sleep(1)
    page.call("Emulation.setScriptExecutionDisabled", value=False)
    views = page.evaluate(VIEWS)
    if not views["shown"] or views["loaded"] != 3 or not views["said"]:
        yield f"without scripts the three score plots are not there: {views}"
    page.picture(pictures / "turntable-without-scripts.png")


def main():
    parser = argparse.ArgumentParser()
    for option in ("--page", "--browser", "--pictures"):
        parser.add_argument(option, required=True)
    options = parser.parse_args()
    pictures = pathlib.Path(options.pictures)
    pictures.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as folder:
        browser, page = start_browser(options.browser, pathlib.Path(folder))
        try:
            page.call("Page.enable")
            wrong = list(check(page, pathlib.Path(options.page).resolve().as_uri(), pictures))
        finally:
            browser.kill()
            browser.wait()
    if wrong:
        sys.exit("\n".join(wrong))
    print("turned by keys, buttons and pointer")


if __name__ == "__main__":
    main()
