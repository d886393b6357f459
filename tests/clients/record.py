"""Opens a record from disk in a headless browser with the network cut, and looks at it.

    python3 record.py --record RECORD --axe AXE.js --browser CHROMIUM --picture FILE

Nothing may be asked of the network, nothing may be reported on the console, and the accessibility
checker must find no violation, in the light and in the dark. Exits 1 and says what is wrong.
"""

import argparse
import json
import pathlib
import sys
import tempfile

from browser import start_browser, wait_for

AXE = "axe.run(document, {resultTypes: ['violations']}).then(found => found.violations.map(v => ({" \
    "id: v.id, help: v.help, nodes: v.nodes.slice(0, 3).map(n => n.html.slice(0, 200))})))"

SEEN = """({
    title: document.title,
    headings: [...document.querySelectorAll('h1, h2, h3')].map(h => h.tagName + ' ' + h.textContent),
    cells: document.querySelectorAll('.cell').length,
    tables: document.querySelectorAll('main table').length,
    pictures: [...document.querySelectorAll('figure img')].map(i => i.naturalWidth),
    maths: document.querySelectorAll('math').length,
    scripts: [...document.querySelectorAll('script')].map(s => s.type),
    json: [...document.querySelectorAll('script[type="application/json"]')].every(s => JSON.parse(s.textContent)),
})"""


def run(options, folder, processes):
    browser, page = start_browser(options.browser, folder)
    processes.append(browser)
    for domain in ("Page", "Runtime", "Log", "Network"):
        page.call(f"{domain}.enable")
    page.call(
        "Network.emulateNetworkConditions",
        offline=True, latency=0, downloadThroughput=0, uploadThroughput=0,
    )
    wrong = []
    axe = pathlib.Path(options.axe).read_text(encoding="utf-8")
    address = pathlib.Path(options.record).resolve().as_uri()
    for scheme in ("light", "dark"):
        page.call(
            "Emulation.setEmulatedMedia",
            features=[{"name": "prefers-color-scheme", "value": scheme}],
        )
        page.call("Page.navigate", url=address)
        wait_for("the record", lambda: page.evaluate(
            "document.readyState === 'complete' && document.URL.startsWith('file:')"))
        page.evaluate(axe + ";true")
        for violation in page.evaluate(AXE):
            wrong.append(f"{scheme}: {json.dumps(violation)}")
        picture = pathlib.Path(options.picture)
        page.picture(picture.with_stem(f"{picture.stem}-{scheme}"))
    for event in page.unasked:
        kind, told = event["method"], event["params"]
        if kind == "Network.requestWillBeSent":
            url = told["request"]["url"]
            if not url.startswith(("file:", "data:")):
                wrong.append(f"asks the network for {url}")
        elif kind == "Runtime.consoleAPICalled" and told["type"] in ("error", "warning", "assert"):
            wrong.append(f"console: {told['args']}")
        elif kind == "Runtime.exceptionThrown":
            wrong.append(f"exception: {told['exceptionDetails']}")
        elif kind == "Log.entryAdded" and told["entry"]["level"] in ("error", "warning"):
            wrong.append(f"log: {told['entry']['text']}")
    print(json.dumps(page.evaluate(SEEN)))
    if wrong:
        sys.exit("\n".join(wrong))


def main():
    parser = argparse.ArgumentParser()
    for option in ("--record", "--axe", "--browser", "--picture"):
        parser.add_argument(option, required=True)
    options = parser.parse_args()
    processes = []
    with tempfile.TemporaryDirectory() as folder:
        try:
            run(options, pathlib.Path(folder), processes)
        finally:
            for process in processes:
                process.terminate()
                process.wait(timeout=20)


if __name__ == "__main__":
    main()
