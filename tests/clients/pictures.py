"""Measures charts in a browser: is any text cut, covered by other text, or without a description?

    python3 pictures.py --page PAGE --browser CHROMIUM --pictures FOLDER

PAGE holds charts inline, each in `<figure data-name="...">`. Every chart is looked at on a light and
on a dark page; a screenshot of each goes to FOLDER. Prints what is wrong and exits 1, or prints how
many charts and texts were measured.
"""

import argparse
import pathlib
import sys
import tempfile

from browser import start_browser, wait_for

# Text may touch: glyphs do not fill their boxes. A few pixels of overlap are the boxes' own air.
MEASURE = """(() => {
    const found = [];
    for (const figure of document.querySelectorAll('figure[data-name]')) {
        const svg = figure.querySelector('svg');
        if (!svg) { found.push({name: figure.dataset.name, texts: 0, wrong: ['no drawing']}); continue; }
        const frame = svg.getBoundingClientRect();
        const wrong = [];
        const texts = [...svg.querySelectorAll('text')].filter(text => text.textContent.trim());
        const boxes = texts.map(text => ({
            text: text.textContent,
            turned: text.hasAttribute('transform'),
            box: text.getBoundingClientRect(),
        }));
        for (const {text, box} of boxes) {
            if (box.left < frame.left - 1 || box.right > frame.right + 1
                || box.top < frame.top - 1 || box.bottom > frame.bottom + 1)
                wrong.push(`text is cut: ${text}`);
        }
        for (let i = 0; i < boxes.length; i++) for (let j = 0; j < i; j++) {
            if (boxes[i].turned || boxes[j].turned) continue;
            const a = boxes[i].box, b = boxes[j].box;
            const across = Math.min(a.right, b.right) - Math.max(a.left, b.left);
            const down = Math.min(a.bottom, b.bottom) - Math.max(a.top, b.top);
            if (across > 2 && down > 4)
                wrong.push(`texts overlap by ${across.toFixed(0)} x ${down.toFixed(0)}: `
                    + `${boxes[j].text} | ${boxes[i].text}`);
        }
        const said = name => svg.querySelector(`:scope > ${name}`)?.textContent.trim();
        for (const part of ['title', 'desc'])
            if (!said(part)) wrong.push(`no ${part} for a screen reader`);
        const named = (svg.getAttribute('aria-labelledby') || '').split(' ');
        if (!named.every(id => id && svg.querySelector(`[id="${id}"]`)))
            wrong.push('its name for a screen reader is not there');
        found.push({name: figure.dataset.name, texts: texts.length, wrong,
                    box: [frame.left + scrollX, frame.top + scrollY, frame.width, frame.height]});
    }
    return found;
})()"""

THEMES = {"light": "#ffffff", "dark": "#1c1c1e"}


def run(options, folder, processes):
    browser, page = start_browser(options.browser, folder)
    processes.append(browser)
    page.call("Page.enable")
    pictures = pathlib.Path(options.pictures)
    pictures.mkdir(parents=True, exist_ok=True)
    wrong, charts, texts = [], 0, 0
    for theme, ground in THEMES.items():
        feature = {"name": "prefers-color-scheme", "value": theme}
        page.call("Emulation.setEmulatedMedia", features=[feature])
        page.call("Page.navigate", url=pathlib.Path(options.page).resolve().as_uri())
        wait_for("the page", lambda: page.evaluate("document.readyState === 'complete'"))
        page.evaluate(f"document.body.style.background = '{ground}', true")
        for chart in page.evaluate(MEASURE):
            charts, texts = charts + 1, texts + chart["texts"]
            wrong += [f"{chart['name']} ({theme}): {text}" for text in chart["wrong"]]
            if "box" in chart:
                left, top, width, height = chart["box"]
                clip = {"x": left, "y": top, "width": width, "height": height, "scale": 1}
                page.picture(pictures / f"{chart['name']}-{theme}.png", clip)
    print(f"{charts} charts and {texts} texts measured")
    if not charts:
        wrong.append("there is no chart in the page")
    if wrong:
        sys.exit("\n".join(wrong))


def main():
    parser = argparse.ArgumentParser()
    for option in ("--page", "--browser", "--pictures"):
        parser.add_argument(option, required=True)
    options = parser.parse_args()
    processes = []
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as folder:
        try:
            run(options, pathlib.Path(folder), processes)
        finally:
            for process in processes:
                process.kill()
                process.wait()


if __name__ == "__main__":
    main()
