"""Opens a notebook in JupyterLab in a headless browser, runs it and looks at the page.

    python3 lab.py --notebook NOTEBOOK --executed EXECUTED --browser CHROMIUM --pictures FOLDER
                   [--theme "JupyterLab Dark"]

EXECUTED is the same notebook with its outputs, made without a browser. The page must show the same
tables, cell by cell of each, and the same charts, byte by byte, and every cell of a table must be
readable on the theme's ground. Screenshots go to FOLDER. Exits 1 and says what differs.
"""

import argparse
import base64
import html.parser
import json
import os
import pathlib
import re
import subprocess
import sys
import tempfile
import time
import urllib.parse

from browser import start_browser, wait_for


class Tables(html.parser.HTMLParser):
    """The tables of a piece of HTML as lists of rows of texts."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.tables = []
        self.open = None
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        if tag == "table":
            self.tables.append([])
        elif tag == "tr" and self.tables:
            self.tables[-1].append([])
        elif tag in ("td", "th") and self.tables and self.tables[-1]:
            self.open = self.tables[-1][-1]
            self.open.append("")

    def handle_endtag(self, tag):
        if tag in ("td", "th"):
            self.open = None

    def handle_data(self, data):
        if self.open is not None:
            self.open[-1] += data


def start_server(folder, root, theme):
    """JupyterLab on a free port, with settings, data and runtime files of its own."""
    environment = dict(
        os.environ,
        JUPYTER_CONFIG_DIR=str(folder / "config"),
        JUPYTER_DATA_DIR=str(folder / "data"),
        JUPYTER_RUNTIME_DIR=str(folder / "runtime"),
        JUPYTERLAB_SETTINGS_DIR=str(folder / "settings"),
        JUPYTERLAB_WORKSPACES_DIR=str(folder / "workspaces"),
    )
    # Cells outside the window would not be in the page otherwise.
    tracker = folder / "settings" / "@jupyterlab" / "notebook-extension"
    tracker.mkdir(parents=True)
    (tracker / "tracker.jupyterlab-settings").write_text('{"windowingMode": "none"}')
    # Nobody is there to answer whether news are wanted.
    notices = folder / "settings" / "@jupyterlab" / "apputils-extension"
    notices.mkdir()
    (notices / "notification.jupyterlab-settings").write_text('{"fetchNews": "false"}')
    (notices / "themes.jupyterlab-settings").write_text(json.dumps({"theme": theme}))
    log = open(folder / "server.log", "wb")
    server = subprocess.Popen(
        [
            sys.executable, "-m", "jupyterlab", "--no-browser", "--allow-root",
            "--ServerApp.ip=127.0.0.1", "--ServerApp.port=0", f"--ServerApp.root_dir={root}",
            "--LabApp.expose_app_in_browser=True",
        ],
        env=environment, stdout=log, stderr=subprocess.STDOUT,
    )

    def address():
        if server.poll() is not None:
            sys.exit("JupyterLab ended:\n" + (folder / "server.log").read_text())
        for path in (folder / "runtime").glob("jpserver-*.json"):
            try:
                told = json.loads(path.read_text())
            except json.JSONDecodeError:
                continue  # It is still being written.
            return told["url"], told["token"]

    return server, *wait_for("JupyterLab's address", address)


STATE = """(() => {
    const widgets = window.jupyterapp ? [...window.jupyterapp.shell.widgets('main')] : [];
    const panel = widgets.find(widget => widget.sessionContext && widget.content.model);
    if (!panel) return null;
    const session = panel.sessionContext.session;
    if (!panel.sessionContext.isReady || !session || !session.kernel) return null;
    const cells = [...panel.content.model.cells].filter(cell => cell.type === 'code');
    return {
        id: panel.id,
        kernel: session.kernel.name,
        idle: session.kernel.status === 'idle',
        counts: cells.map(cell => cell.executionCount),
        empty: cells.map(cell => cell.sharedModel.getSource().trim() === ''),
    };
})()"""

SHOWN = """(() => [...document.querySelectorAll('.jp-Notebook .jp-CodeCell')].map(cell => ({
    tables: [...cell.querySelectorAll('.jp-OutputArea-output table')].map(table =>
        [...table.rows].map(row => [...row.cells].map(cell => cell.textContent))),
    charts: [...cell.querySelectorAll('.jp-RenderedSVG')].map(chart => {
        const image = chart.querySelector('img');
        return image ? {source: image.src, width: image.naturalWidth}
                     : {source: chart.innerHTML, width: chart.getBoundingClientRect().width};
    }),
    errors: [...cell.querySelectorAll('[data-mime-type*="stderr"], [data-mime-type*="error"]')]
        .map(error => error.textContent),
})))()"""


# The least contrast of a table's text with what lies behind it (WCAG 2.2), and where; dimmed numbers,
# which are meant to recede, are left out.
CONTRAST = """(() => {
    const channels = color => (color.match(/[\\d.]+/g) || []).map(Number);
    const luminance = ([r, g, b]) => {
        const [x, y, z] = [r, g, b].map(c => (c /= 255) <= 0.04045 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4);
        return 0.2126 * x + 0.7152 * y + 0.0722 * z;
    };
    const over = ([r, g, b, a = 1], [x, y, z]) => [r * a + x * (1 - a), g * a + y * (1 - a), b * a + z * (1 - a)];
    const ground = element => {
        const layers = [];
        for (let at = element; at; at = at.parentElement) layers.push(channels(getComputedStyle(at).backgroundColor));
        return layers.reverse().reduce((below, layer) => layer.length ? over(layer, below) : below, [255, 255, 255]);
    };
    let least = {contrast: 99, text: ''};
    for (const cell of document.querySelectorAll('.jp-OutputArea-output table :is(td, th)')) {
        let opacity = 1;
        for (let at = cell; at; at = at.parentElement) opacity *= Number(getComputedStyle(at).opacity);
        if (!cell.textContent.trim() || opacity < 1) continue;
        const behind = ground(cell);
        const ink = over(channels(getComputedStyle(cell).color), behind);
        const [a, b] = [luminance(ink), luminance(behind)];
        const contrast = (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05);
        if (contrast < least.contrast) least = {contrast, text: cell.textContent, theme: document.body.dataset.jpThemeName};
    }
    return least;
})()"""


# What each table becomes when it is selected, copied and pasted as text: a line for each row, cells
# apart by tabs.
PASTED = """[...document.querySelectorAll('.jp-OutputArea-output table')].map(table => {
    const range = document.createRange(), selection = getSelection();
    range.selectNode(table);
    selection.removeAllRanges();
    selection.addRange(range);
    const text = selection.toString();
    selection.removeAllRanges();
    return text;
})"""
LIKE_A_NUMBER = re.compile(r"[-+\u2212]?[\d.,\s\u2007\u2009\u202f]*\d[\d.,\u2007\u2009\u202f]*(e-?\d+)?( ?%)?")


def not_numbers(pasted):
    """Cells that look like numbers and would not be numbers in a spreadsheet."""
    n_numbers = 0
    for text in pasted:
        for cell in re.split(r"[\t\n]", text):
            cell = cell.strip()
            if not LIKE_A_NUMBER.fullmatch(cell):
                continue
            try:
                float(cell.removesuffix("%"))
                n_numbers += 1
            except ValueError:
                yield f"pasted into a spreadsheet, {cell!r} is not a number"
    if n_numbers < 100:
        yield f"only {n_numbers} numbers could be pasted"


def expected(executed):
    """What each code cell must show, out of the executed notebook."""
    cells = []
    for cell in json.loads(pathlib.Path(executed).read_text(encoding="utf-8"))["cells"]:
        if cell["cell_type"] != "code":
            continue
        tables, charts = [], []
        for output in cell["outputs"]:
            data = {mime: "".join(text) for mime, text in output.get("data", {}).items()
                    if mime in ("text/html", "image/svg+xml")}
            # The page shows the richest form only, and HTML ranks above a picture.
            if "text/html" in data:
                tables += Tables(data["text/html"]).tables
            elif "image/svg+xml" in data:
                charts.append(data["image/svg+xml"])
        cells.append({"tables": tables, "charts": charts})
    return cells


def svg_of(source):
    """The text of a chart in the page: a data address, or the markup itself."""
    kind, comma, data = source.partition(",")
    if not comma or not kind.startswith("data:image/svg+xml"):
        return source
    if kind.endswith(";base64"):
        return base64.b64decode(data).decode()
    return urllib.parse.unquote(data)


def differences(shown, wanted):
    if len(shown) != len(wanted):
        yield f"the page has {len(shown)} code cells, the notebook {len(wanted)}"
        return
    if not any(cell["tables"] for cell in wanted) or not any(cell["charts"] for cell in wanted):
        yield "the executed notebook has no table or no chart to look for"
    for place, (seen, want) in enumerate(zip(shown, wanted), start=1):
        for error in seen["errors"]:
            yield f"code cell {place} shows an error: {error}"
        strip = lambda tables: [[[text.strip() for text in row] for row in t] for t in tables]
        if strip(seen["tables"]) != strip(want["tables"]):
            yield f"code cell {place}: tables {seen['tables']} instead of {want['tables']}"
        charts = [svg_of(chart["source"]).strip() for chart in seen["charts"]]
        if charts != [chart.strip() for chart in want["charts"]]:
            yield f"code cell {place}: {len(charts)} charts that are not the {len(want['charts'])} expected"
        if any(not chart["width"] for chart in seen["charts"]):
            yield f"code cell {place}: a chart has no width, so the browser could not draw it"


def run(options, folder, processes):
    notebook = pathlib.Path(options.notebook).resolve()
    server, address, token = start_server(folder, notebook.parent, options.theme)
    processes.append(server)
    browser, page = start_browser(options.browser, folder)
    processes.append(browser)

    page.call("Page.enable")
    name = urllib.parse.quote(notebook.name)
    page.call("Page.navigate", url=f"{address}lab/tree/{name}?token={token}&reset")
    state = wait_for("the notebook and its kernel", lambda: page.evaluate(STATE))
    if state["kernel"] != options.kernel:
        sys.exit(f"the notebook opened with the kernel {state['kernel']!r}")
    for script in (
        f"window.jupyterapp.shell.activateById('{state['id']}')",
        "window.jupyterapp.shell.collapseLeft()",
        # Its promise comes only when all cells have run; that is waited for below.
        "window.jupyterapp.commands.execute('notebook:run-all-cells'), true",
    ):
        page.evaluate(script)

    def finished():
        state = page.evaluate(STATE)
        done = all(c or e for c, e in zip(state["counts"], state["empty"])) if state else False
        return done and state["idle"]

    wait_for("the notebook to have run", finished)
    # The last outputs are drawn a moment after the kernel said that it is idle.
    wanted = expected(options.executed)
    end = time.monotonic() + 30
    while True:
        shown = page.evaluate(SHOWN)
        wrong = list(differences(shown, wanted))
        if not wrong or time.monotonic() > end:
            break
        time.sleep(0.5)

    wrong += not_numbers(page.evaluate(PASTED))
    least = page.evaluate(CONTRAST)
    if least.get("theme") != options.theme:
        wrong.append(f"the theme is {least.get('theme')}")
    if least["contrast"] < 4.5:
        wrong.append(f"contrast {least['contrast']:.2f} of {least['text']!r} in {options.theme}")
    pictures = pathlib.Path(options.pictures)
    pictures.mkdir(parents=True, exist_ok=True)
    count = page.evaluate("document.querySelectorAll('.jp-Notebook .jp-Cell').length")
    step = 0
    for cell_idx in range(0, count, 3):
        page.evaluate(
            f"document.querySelectorAll('.jp-Notebook .jp-Cell')[{cell_idx}].scrollIntoView(), true"
        )
        time.sleep(0.3)
        step += 1
        page.picture(pictures / f"page-{step:02d}.png")
    tables = sum(len(cell["tables"]) for cell in shown)
    charts = sum(len(cell["charts"]) for cell in shown)
    print(f"{len(shown)} code cells, {tables} tables and {charts} charts in the page")
    if wrong:
        sys.exit("the page differs:\n" + "\n".join(wrong))


def main():
    parser = argparse.ArgumentParser()
    for option in ("--notebook", "--executed", "--browser", "--pictures"):
        parser.add_argument(option, required=True)
    parser.add_argument("--kernel", default="semiaxis")
    parser.add_argument("--theme", default="JupyterLab Light")
    options = parser.parse_args()
    processes = []
    with tempfile.TemporaryDirectory() as folder:
        try:
            run(options, pathlib.Path(folder), processes)
        finally:
            for process in reversed(processes):
                process.terminate()
            for process in processes:
                try:
                    process.wait(timeout=20)
                except subprocess.TimeoutExpired:
                    process.kill()


if __name__ == "__main__":
    main()
