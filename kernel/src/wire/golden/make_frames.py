"""Writes frames.json: signed messages made by the reference client library, frame by frame.

Run by hand, never by the tests:

    python3 -m venv venv && venv/bin/pip install jupyter_client==8.10.0
    venv/bin/python make_frames.py > frames.json

The messages are built by jupyter_client's own KernelClient (so the contents are what it really
sends) and serialised and signed by its Session. Frames are written as base64.
"""

import base64
import json
import sys

import jupyter_client
from jupyter_client import KernelClient
from jupyter_client.session import Session

KEY = "a key shared by both sides"


class Capture:
    """Stands where a channel would, and keeps the messages instead of sending them."""

    def __init__(self):
        self.messages = []

    def send(self, message):
        self.messages.append(message)


def encode(session, message, identities=(), buffers=()):
    frames = session.serialize(message, ident=list(identities)) + list(buffers)
    return [base64.b64encode(bytes(frame)).decode() for frame in frames]


def main():
    session = Session(key=KEY.encode(), session="golden", username="reader")
    client = KernelClient(session=session)
    capture = Capture()
    client._shell_channel = client._control_channel = client._stdin_channel = capture

    client.kernel_info()
    client.execute("let größe = \"ζ\";\nprintln!(\"{größe}\");", user_expressions={"a": "1 + 1"})
    client.execute("1", silent=True, store_history=False, allow_stdin=False, stop_on_error=False)
    client.complete("let größe = data.mat")
    client.inspect("principal_components", 3, detail_level=1)
    client.history(hist_access_type="tail", n=5)
    client.history(hist_access_type="range", session=0, start=1, stop=4, output=True, raw=False)
    client.history(hist_access_type="range")
    client.history(hist_access_type="search", pattern="let *", n=2, unique=True)
    client.is_complete("fn f() {")
    client.comm_info("some.target")
    client.input("an answer")
    client.shutdown(restart=True)

    made = [
        {"frames": encode(session, message), "type": message["header"]["msg_type"],
         "content": message["content"], "identities": 0, "buffers": 0}
        for message in capture.messages
    ]
    interrupt = session.msg("interrupt_request", content={})
    made.append({"frames": encode(session, interrupt, [b"\x00\x80abc", b"route"]),
                 "type": "interrupt_request", "content": {}, "identities": 2, "buffers": 0})
    opened = session.msg("comm_open", content={
        "comm_id": "c1", "target_name": "none.such", "data": {"x": [1, 2]}})
    made.append({"frames": encode(session, opened, [b"one"], [b"\x00\x01\x02", b""]),
                 "type": "comm_open", "content": opened["content"],
                 "identities": 1, "buffers": 2})

    json.dump({
        "made_by": f"jupyter_client {jupyter_client.__version__}, "
                   f"Python {sys.version.split()[0]}, make_frames.py",
        "key": KEY,
        "messages": made,
    }, sys.stdout, indent=1, ensure_ascii=False)
    print()


if __name__ == "__main__":
    main()
