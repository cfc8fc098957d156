"""A headless browser driven by the W3C WebDriver protocol: plain HTTP with JSON, nothing but the standard library.

Without chromium and chromedriver (packages ``chromium chromium-driver``) everything here fails.
"""

from __future__ import annotations

import base64
import json
import shutil
import subprocess
import tempfile
import time
import urllib.error
import urllib.request
from pathlib import Path
from types import TracebackType
from typing import Any

HOSTILE = '<script>alert(1)</script><img src=x onerror=alert(2)> & "quoted"'
"""A name that is markup."""
ELEMENT = "element-6066-11e4-a52e-4f735466cecf"
"""The key under which WebDriver names an element (W3C WebDriver, section 12.1)."""
KEYS = {"tab": "\ue004", "enter": "\ue007", "space": " ", "down": "\ue015", "up": "\ue013"}
"""Keys as WebDriver writes them (W3C WebDriver, section 17.4.2)."""
ARGUMENTS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync", "--disable-dev-shm-usage",
)  # fmt: skip


class BrowserFailed(AssertionError):
    """The browser is not there, or did not do what it was told."""


class Browser:
    """One browser with an empty profile of its own, and the driver that it hears."""

    def __init__(self) -> None:
        program, engine = shutil.which("chromedriver"), shutil.which("chromium")
        if program is None or engine is None:
            raise BrowserFailed("chromium and chromedriver are not installed: apt-get install chromium chromium-driver")
        self.folder = tempfile.TemporaryDirectory(ignore_cleanup_errors=True)
        self.log = Path(self.folder.name) / "driver.log"
        self.process = subprocess.Popen(
            [program, "--port=0", f"--log-path={self.log}"], stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True
        )
        self.session = ""
        try:
            assert self.process.stdout is not None
            line = next(line for line in self.process.stdout if "successfully on port" in line)
            port = line.strip().rstrip(".").rsplit(" ", 1)[-1]
            self.root = f"http://127.0.0.1:{port}"
            wish = {
                "browserName": "chrome",
                "goog:chromeOptions": {"binary": engine, "args": [*ARGUMENTS, f"--user-data-dir={self.folder.name}/profile"]},
                "goog:loggingPrefs": {"browser": "ALL", "performance": "ALL"},
            }
            self.session = self._ask("POST", "/session", {"capabilities": {"alwaysMatch": wish}})["sessionId"]
        except BaseException:
            self.close()
            raise

    def __enter__(self) -> Browser:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None) -> None:
        self.close()

    def close(self) -> None:
        """End the session and the driver that this object started."""
        try:
            if self.session:
                self.call("DELETE", "")
        finally:
            self.process.terminate()
            self.process.wait(timeout=10)
            if self.process.stdout is not None:
                self.process.stdout.close()
            self.folder.cleanup()

    def _ask(self, method: str, path: str, body: dict[str, Any] | None = None) -> Any:
        data = None if body is None else json.dumps(body).encode()
        request = urllib.request.Request(self.root + path, data, {"Content-Type": "application/json"}, method=method)
        try:
            with urllib.request.build_opener(urllib.request.ProxyHandler({})).open(request, timeout=60) as reply:
                return json.load(reply)["value"]
        except urllib.error.HTTPError as error:
            value = json.load(error)["value"]
            raise BrowserFailed(f"{method} {path}: {value['error']}: {value['message']}") from error

    def call(self, method: str, path: str, **body: Any) -> Any:
        """One command of this session."""
        return self._ask(method, f"/session/{self.session}{path}", body if method == "POST" else None)

    def devtools(self, command: str, **parameters: Any) -> Any:
        """One command of the DevTools protocol."""
        return self.call("POST", "/goog/cdp/execute", cmd=command, params=parameters)

    def open(self, path: Path) -> None:
        """Load a file; logs of what came before are dropped."""
        self.call("POST", "/url", url="about:blank")
        for kind in ("browser", "performance"):
            self.call("POST", "/se/log", type=kind)
        self.call("POST", "/url", url=path.absolute().as_uri())

    def run(self, script: str, *arguments: Any) -> Any:
        """What a function body returns in the page."""
        return self.call("POST", "/execute/sync", script=script, args=list(arguments))

    def find(self, css: str) -> str:
        """The first element of a selector."""
        return str(self.call("POST", "/element", using="css selector", value=css)[ELEMENT])

    def click(self, css: str) -> None:
        """Click on an element, with a real pointer."""
        self.call("POST", f"/element/{self.find(css)}/click")

    def type(self, css: str, text: str) -> None:
        """Replace the text of a field."""
        element = self.find(css)
        self.call("POST", f"/element/{element}/clear")
        self.call("POST", f"/element/{element}/value", text=text)

    def press(self, *names: str) -> None:
        """Press keys, one after another, wherever the focus is."""
        actions = [{"type": kind, "value": KEYS[name]} for name in names for kind in ("keyDown", "keyUp")]
        self.call("POST", "/actions", actions=[{"type": "key", "id": "keyboard", "actions": actions}])

    def logged(self, kind: str) -> list[dict[str, Any]]:
        """Log entries since the page was loaded: ``browser`` (console, refusals) or ``performance`` (requests)."""
        return list(self.call("POST", "/se/log", type=kind))

    def requests(self) -> list[str]:
        """Addresses that the page asked for."""
        messages = [json.loads(entry["message"])["message"] for entry in self.logged("performance")]
        return [m["params"]["request"]["url"] for m in messages if m["method"] == "Network.requestWillBeSent"]

    def size(self, width: int, height: int = 900) -> None:
        """Set the size of the view [px]."""
        self.devtools("Emulation.setDeviceMetricsOverride", width=width, height=height, deviceScaleFactor=1, mobile=False)

    def media(self, *, scheme: str = "light", kind: str = "") -> None:
        """Prefer a colour scheme, or show the page as another medium would."""
        features = [{"name": "prefers-color-scheme", "value": scheme}]
        self.devtools("Emulation.setEmulatedMedia", media=kind, features=features)

    def scripts(self, on: bool) -> None:
        """Let pages run their scripts, or not."""
        self.devtools("Emulation.setScriptExecutionDisabled", value=not on)

    def pdf(self, path: Path, width: float, height: float) -> None:
        """Print the page on sheets of a size [cm]."""
        page = {"width": width, "height": height}
        data = self.call("POST", "/print", page=page, margin={"top": 1.4, "bottom": 1.4, "left": 1.3, "right": 1.3}, background=False)
        path.write_bytes(base64.b64decode(data))

    def picture(self, path: Path, *, whole: bool = True) -> None:
        """Save what the page looks like."""
        data = self.devtools("Page.captureScreenshot", captureBeyondViewport=whole)["data"]
        path.write_bytes(base64.b64decode(data))

    def wait(self, script: str, seconds: float = 5.0) -> None:
        """Wait until a function body returns true."""
        end = time.monotonic() + seconds
        while not self.run(script):
            if time.monotonic() > end:
                raise BrowserFailed(f"not true within {seconds} s: {script}")
            time.sleep(0.02)
