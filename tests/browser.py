"""A small driver for headless Chromium over its debugging pipe: no port, no network, no further package."""

from __future__ import annotations

import base64
import json
import os
import select
import shutil
import subprocess
import tempfile
import time
from pathlib import Path

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
FLAGS = [
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--hide-scrollbars",
    "--remote-debugging-pipe",
]
_PATIENCE_SECONDS = 60


class Browser:
    """One Chromium with one page. Script errors, console errors and requests are collected."""

    def __init__(self):
        self.profile = tempfile.mkdtemp(prefix="phasedb-browser-")
        to_browser, self._write = os.pipe()
        self._read, from_browser = os.pipe()

        def wire():  # the pipe protocol reads commands on descriptor 3 and answers on 4
            spare_in, spare_out = os.dup(to_browser), os.dup(from_browser)
            os.dup2(spare_in, 3)
            os.dup2(spare_out, 4)

        self.process = subprocess.Popen(
            [CHROMIUM, *FLAGS, f"--user-data-dir={self.profile}"],
            preexec_fn=wire,
            close_fds=False,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        os.close(to_browser)
        os.close(from_browser)
        self._buffer = b""
        self._count = 0
        self.errors = []
        self.requests = []
        self._events = []
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        self.session = None
        self.session = self.call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Log", "Network"):
            self.call(f"{domain}.enable")

    def __enter__(self):
        return self

    def __exit__(self, *stopped):
        self.process.terminate()
        self.process.wait(timeout=20)
        os.close(self._write)
        os.close(self._read)
        shutil.rmtree(self.profile, ignore_errors=True)

    def _message(self):
        deadline = time.monotonic() + _PATIENCE_SECONDS
        while b"\0" not in self._buffer:
            ready, _, _ = select.select([self._read], [], [], max(0.0, deadline - time.monotonic()))
            chunk = os.read(self._read, 1 << 20) if ready else b""
            if not chunk:
                raise RuntimeError("Chromium gave no answer")
            self._buffer += chunk
        text, _, self._buffer = self._buffer.partition(b"\0")
        return json.loads(text)

    def _note(self, event):
        method, params = event.get("method"), event.get("params", {})
        if method == "Runtime.exceptionThrown":
            details = params["exceptionDetails"]
            self.errors.append(details.get("exception", {}).get("description") or details["text"])
        elif method == "Log.entryAdded" and params["entry"]["level"] == "error":
            self.errors.append(params["entry"]["text"])
        elif method == "Runtime.consoleAPICalled" and params["type"] == "error":
            self.errors.append(str(params["args"]))
        elif method == "Network.requestWillBeSent":
            self.requests.append(params["request"]["url"])
        self._events.append(method)

    def call(self, method, **params):
        self._count += 1
        message = {"id": self._count, "method": method, "params": params}
        if getattr(self, "session", None):
            message["sessionId"] = self.session
        os.write(self._write, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._message()
            if answer.get("id") == self._count:
                if "error" in answer:
                    raise RuntimeError(f"{method}: {answer['error']}")
                return answer["result"]
            self._note(answer)

    def open(self, path, width=1280, height=900, *, touch=False):
        self.call(
            "Emulation.setDeviceMetricsOverride",
            width=width,
            height=height,
            deviceScaleFactor=1,
            mobile=touch,
        )
        self.call("Emulation.setTouchEmulationEnabled", enabled=touch)
        self._events.clear()
        self.call("Page.navigate", url=Path(path).resolve().as_uri())
        while "Page.loadEventFired" not in self._events:
            self._note(self._message())

    def run(self, expression):
        result = self.call("Runtime.evaluate", expression=expression, returnByValue=True)
        if "exceptionDetails" in result:
            raise RuntimeError(result["exceptionDetails"]["exception"]["description"])
        return result["result"].get("value")

    def key(self, name, code=None):
        codes = {
            "Tab": 9,
            "Enter": 13,
            "Escape": 27,
            "ArrowLeft": 37,
            "ArrowUp": 38,
            "ArrowRight": 39,
            "ArrowDown": 40,
        }
        text = {"Enter": "\r"}.get(name)
        common = {"key": name, "code": code or name, "windowsVirtualKeyCode": codes[name]}
        self.call("Input.dispatchKeyEvent", type="keyDown", **common, **({"text": text} if text else {}))
        self.call("Input.dispatchKeyEvent", type="keyUp", **common)

    def centre(self, selector):
        """Scroll to the first visible match and return its centre in the window."""
        return self.run(
            "(function(selector){var e=Array.from(document.querySelectorAll(selector)).find(function(x){"
            "return x.getClientRects().length>0});e.scrollIntoView({block:'center'});"
            "var r=e.getBoundingClientRect();return [r.x+r.width/2,r.y+r.height/2]})"
            f"({json.dumps(selector)})"
        )

    def hover(self, selector):
        x, y = self.centre(selector)
        self.call("Input.dispatchMouseEvent", type="mouseMoved", x=x, y=y)

    def tap(self, selector):
        x, y = self.centre(selector)
        self.call("Input.dispatchTouchEvent", type="touchStart", touchPoints=[{"x": x, "y": y}])
        self.call("Input.dispatchTouchEvent", type="touchEnd", touchPoints=[])

    def click(self, selector):
        x, y = self.centre(selector)
        for kind in ("mousePressed", "mouseReleased"):
            self.call("Input.dispatchMouseEvent", type=kind, x=x, y=y, button="left", clickCount=1)

    def screenshot(self, path):
        size = self.call("Page.getLayoutMetrics")["cssContentSize"]
        clip = {"x": 0, "y": 0, "width": size["width"], "height": size["height"], "scale": 1}
        data = self.call("Page.captureScreenshot", captureBeyondViewport=True, clip=clip)["data"]
        Path(path).write_bytes(base64.b64decode(data))

    def print_pdf(self, path):
        data = self.call("Page.printToPDF", printBackground=False, preferCSSPageSize=True)["data"]
        Path(path).write_bytes(base64.b64decode(data))
