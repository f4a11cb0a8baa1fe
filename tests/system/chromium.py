"""Chromium without a window for the tests, driven through its DevTools protocol over a pair of pipes.

Needs Debian's chromium. WebGL2 runs on the processor, by SwiftShader. Messages are JSON that ends in a
NUL, read by the browser from descriptor 3 and written to descriptor 4 (--remote-debugging-pipe).
"""

import base64
import json
import os
import select
import shlex
import subprocess
import time

_FLAGS = (
    "--headless", "--no-sandbox", "--use-angle=swiftshader", "--enable-unsafe-swiftshader",
    "--remote-debugging-pipe", "--no-first-run", "--disable-extensions", "--disable-background-networking",
    "--disable-dev-shm-usage", "--force-color-profile=srgb", "--hide-scrollbars",
)  # fmt: skip
_PATIENCE = 120  # seconds for any answer


class Chromium:
    """A browser with one page. Use as a context manager.

    `requests` are the addresses that pages asked for.
    """

    def __init__(self, profile, *flags):
        self._profile, self._flags = profile, flags
        self._number, self._buffer, self.session = 0, b"", None
        self.requests = []

    def __enter__(self):
        to_read, self._write = os.pipe()
        self._read, to_write = os.pipe()
        command = ["chromium", *_FLAGS, *self._flags, f"--user-data-dir={self._profile}", "about:blank"]
        # Two steps by way of 8 and 9, since a pipe may already have one of the numbers 3 and 4.
        moved = f"exec {shlex.join(command)} 8<&{to_read} 9>&{to_write} 3<&8 4>&9"
        self._process = subprocess.Popen(
            ["bash", "-c", moved], pass_fds=(to_read, to_write), stderr=subprocess.DEVNULL
        )
        os.close(to_read)
        os.close(to_write)
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        attached = self.call("Target.attachToTarget", targetId=target, flatten=True)
        self.session = attached["sessionId"]
        self.call("Page.enable")
        self.call("Network.enable")
        return self

    def __exit__(self, *error):
        self.session = None
        try:
            self.call("Browser.close")
        except (AssertionError, OSError):
            self._process.kill()
        self._process.wait(30)
        os.close(self._read)
        os.close(self._write)

    def open(self, path, width=640, height=900, dark=False):
        """Show a file, at a size in CSS pixels and in a colour scheme."""
        scheme = [{"name": "prefers-color-scheme", "value": "dark" if dark else "light"}]
        self.call("Emulation.setEmulatedMedia", features=scheme)
        metrics = {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": False}
        self.call("Emulation.setDeviceMetricsOverride", **metrics)
        self._loaded = False
        self.call("Page.navigate", url=path.resolve().as_uri())
        while not self._loaded:
            self._notice(self._message())

    def run_first(self, script):
        """A script that every page opened from now on runs before its own."""
        self.call("Page.addScriptToEvaluateOnNewDocument", source=script)

    def value(self, expression):
        """What a JavaScript expression gives, promises awaited."""
        answer = self.call("Runtime.evaluate", expression=expression, awaitPromise=True, returnByValue=True)
        assert "exceptionDetails" not in answer, answer["exceptionDetails"]
        return answer["result"].get("value")

    def press(self, key):
        """Press and let go a key."""
        for kind in ("keyDown", "keyUp"):
            self.call("Input.dispatchKeyEvent", type=kind, key=key)

    def move_pointer(self, x, y, button="none", kind="mouseMoved"):
        """The pointer to a place of the page, in CSS pixels."""
        count = 1 if kind != "mouseMoved" else 0
        held = 1 if button == "left" and kind != "mouseReleased" else 0
        self.call(
            "Input.dispatchMouseEvent", type=kind, x=x, y=y, button=button, buttons=held, clickCount=count
        )

    def screenshot(self, path, whole=True):
        """Write a PNG of the page."""
        found = self.call("Page.captureScreenshot", captureBeyondViewport=whole)
        path.write_bytes(base64.b64decode(found["data"]))

    def call(self, method, **parameters):
        """Send a command, wait for its answer."""
        self._number += 1
        message = {"id": self._number, "method": method, "params": parameters}
        if self.session:
            message["sessionId"] = self.session
        os.write(self._write, json.dumps(message).encode() + b"\0")
        while True:
            answer = self._message()
            if answer.get("id") == self._number:
                assert "error" not in answer, (method, answer["error"])
                return answer["result"]
            self._notice(answer)

    def _notice(self, event):
        if event.get("method") == "Network.requestWillBeSent":
            self.requests.append(event["params"]["request"]["url"])
        if event.get("method") == "Page.loadEventFired":
            self._loaded = True

    def _message(self):
        end = time.monotonic() + _PATIENCE
        while b"\0" not in self._buffer:
            ready, _, _ = select.select([self._read], [], [], max(0, end - time.monotonic()))
            assert ready, "chromium does not answer"
            piece = os.read(self._read, 1 << 20)
            assert piece, "chromium has ended; is it installed?"
            self._buffer += piece
        message, _, self._buffer = self._buffer.partition(b"\0")
        return json.loads(message)
