"""A real browser for tests: Chromium without a window, driven over a pipe; no network port is opened."""

import base64
import json
import os
import select
import shutil
import subprocess
from contextlib import contextmanager
from pathlib import Path

FOUND = shutil.which("chromium")
_OPTIONS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--disable-dev-shm-usage",
    "--remote-debugging-pipe",
)
_SECONDS = 60
_KEYS = {"Tab": 9, "Enter": 13}


class Page:
    """A page of the browser: what it shows, what it asked for, and what it complained of."""

    def __init__(self, commands, answers):
        self._commands, self._answers = commands, answers
        self._asked, self._session, self._read = 0, None, b""
        self.requests, self.complaints = [], []
        target = self._call("Target.createTarget", url="about:blank")["targetId"]
        self._session = self._call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        for domain in ("Page", "Network", "Log", "Runtime"):
            self._call(f"{domain}.enable")

    def open(self, path, width, height=900, is_dark=False, zoom=1, media=""):
        """Show a file at that width; a zoom of 2 leaves the page half as many of its own pixels."""
        scheme = {"name": "prefers-color-scheme", "value": "dark" if is_dark else "light"}
        self._call("Emulation.setEmulatedMedia", media=media, features=[scheme])
        size = {"width": width // zoom, "height": height // zoom}
        self._call("Emulation.setDeviceMetricsOverride", **size, deviceScaleFactor=zoom, mobile=False)
        self._call("Emulation.setScrollbarsHidden", hidden=True)
        self._call("Page.navigate", url=Path(path).resolve().as_uri())
        self.tell("new Promise(done => document.readyState == 'complete' ? done() : addEventListener('load', done))")

    def tell(self, expression):
        """The value of an expression of the page's own language."""
        told = self._call("Runtime.evaluate", expression=expression, returnByValue=True, awaitPromise=True)
        if "exceptionDetails" in told:
            raise AssertionError(told["exceptionDetails"])
        return told["result"].get("value")

    def press(self, key):
        """Press a key and let it go."""
        for kind in ("keyDown", "keyUp"):
            self._call("Input.dispatchKeyEvent", type=kind, key=key, code=key, windowsVirtualKeyCode=_KEYS[key])

    def picture(self, path):
        """The whole page as a PNG."""
        made = self._call("Page.captureScreenshot", captureBeyondViewport=True)
        Path(path).write_bytes(base64.b64decode(made["data"]))

    def printed(self, path):
        """The page printed to a PDF."""
        self._call("Emulation.setEmulatedMedia", media="print")
        made = self._call("Page.printToPDF", printBackground=False, preferCSSPageSize=True)
        Path(path).write_bytes(base64.b64decode(made["data"]))

    def _call(self, method, **parameters):
        self._asked += 1
        sent = {"id": self._asked, "method": method, "params": parameters}
        if self._session:
            sent["sessionId"] = self._session
        os.write(self._commands, json.dumps(sent).encode() + b"\0")
        while (got := self._next()).get("id") != self._asked:
            self._note(got)
        if "error" in got:
            raise AssertionError(f"{method}: {got['error']}")
        return got["result"]

    def _next(self):
        while b"\0" not in self._read:
            ready, _, _ = select.select([self._answers], [], [], _SECONDS)
            more = os.read(self._answers, 1 << 16) if ready else b""
            if not more:
                raise AssertionError("the browser says nothing more")
            self._read += more
        message, _, self._read = self._read.partition(b"\0")
        return json.loads(message)

    def _note(self, event):
        if event.get("method") == "Network.requestWillBeSent":
            self.requests.append(event["params"]["request"]["url"])
        if event.get("method") == "Log.entryAdded":
            self.complaints.append(event["params"]["entry"]["text"])


@contextmanager
def page(folder):
    """A page of a browser that keeps all it writes in `folder`, and is ended afterwards."""
    to_browser, from_browser = os.pipe(), os.pipe()
    ends = (to_browser[0], from_browser[1])
    wire = f'exec 3<&{ends[0]} 4>&{ends[1]}; exec "$@"'
    command = ["/bin/bash", "-c", wire, "browser", FOUND, *_OPTIONS, f"--user-data-dir={folder}"]
    quiet = {"stdin": subprocess.DEVNULL, "stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
    home = {**os.environ, "HOME": str(folder), "XDG_CONFIG_HOME": str(folder), "XDG_CACHE_HOME": str(folder)}
    with subprocess.Popen(command, pass_fds=ends, env=home, **quiet) as process:
        try:
            for each in ends:
                os.close(each)
            yield Page(to_browser[1], from_browser[0])
        finally:
            process.terminate()
            process.wait(_SECONDS)
            os.close(to_browser[1])
            os.close(from_browser[0])
