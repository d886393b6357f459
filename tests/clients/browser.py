"""A headless browser, driven through its own debugging protocol; the scripts beside this use it."""

import base64
import json
import subprocess
import sys
import time
import urllib.request

import websocket

DEADLINE_S = 300


class Page:
    """One page of a browser, through the browser's own debugging protocol."""

    def __init__(self, url):
        self.socket = websocket.create_connection(
            url, timeout=DEADLINE_S, suppress_origin=True, max_size=None
        )
        self.number = 0
        self.unasked = []  # What the browser tells by itself, once a domain of it is enabled.

    def call(self, method, **params):
        self.number += 1
        self.socket.send(json.dumps({"id": self.number, "method": method, "params": params}))
        while True:
            message = json.loads(self.socket.recv())
            if message.get("id") == self.number:
                if "error" in message:
                    raise RuntimeError(f"{method}: {message['error']}")
                return message["result"]
            self.unasked.append(message)

    def evaluate(self, script):
        answer = self.call(
            "Runtime.evaluate", expression=script, awaitPromise=True, returnByValue=True
        )
        if "exceptionDetails" in answer:
            raise RuntimeError(f"{script}: {answer['exceptionDetails']}")
        return answer["result"].get("value")

    def picture(self, path, clip=None):
        more = {"clip": clip, "captureBeyondViewport": True} if clip else {}
        data = self.call("Page.captureScreenshot", format="png", **more)["data"]
        path.write_bytes(base64.b64decode(data))


def wait_for(what, probe):
    """Asks until the answer is true; a step that never comes ends with its name."""
    end = time.monotonic() + DEADLINE_S
    while time.monotonic() < end:
        answer = probe()
        if answer:
            return answer
        time.sleep(0.2)
    sys.exit(f"waited {DEADLINE_S} s in vain for {what}")


def start_browser(chromium, folder):
    log = open(folder / "browser.log", "wb")
    browser = subprocess.Popen(
        [
            chromium, "--headless=new", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage",
            "--no-first-run", "--remote-debugging-port=0", f"--user-data-dir={folder / 'browser'}",
            "--window-size=1300,1700", "about:blank",
        ],
        stdout=log, stderr=subprocess.STDOUT,
    )

    def page():
        if browser.poll() is not None:
            sys.exit("the browser ended:\n" + (folder / "browser.log").read_text())
        try:
            port = (folder / "browser" / "DevToolsActivePort").read_text().split()[0]
            with urllib.request.urlopen(f"http://127.0.0.1:{port}/json/list") as answer:
                pages = [entry for entry in json.load(answer) if entry["type"] == "page"]
        except (OSError, IndexError):
            return None
        return pages and pages[0]["webSocketDebuggerUrl"]

    return browser, Page(wait_for("the browser's page", page))
