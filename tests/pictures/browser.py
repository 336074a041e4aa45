"""Drive headless Chromium over its DevTools pipe: no port, no driver program, no further package."""

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
from types import TracebackType
from typing import Any

FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync", "--disable-dev-shm-usage", "--hide-scrollbars", "--remote-debugging-pipe",
)  # fmt: skip


def find_chromium() -> str | None:
    return next(
        (found for name in ("chromium", "chromium-browser", "google-chrome") if (found := shutil.which(name))), None
    )


class Browser:
    """One page in one browser with a profile of its own; keeps every request and every console error."""

    def __init__(self, program: str, width: int = 1200, height: int = 900) -> None:
        self._profile = tempfile.TemporaryDirectory(prefix="chromium-", ignore_cleanup_errors=True)
        read_commands, self._out = os.pipe()
        self._in, write_answers = os.pipe()
        # The browser reads commands from descriptor 3 and writes answers to 4.
        command = " ".join([f"exec 3<&{read_commands} 4>&{write_answers};", 'exec "$0" "$@"'])
        self._process = subprocess.Popen(
            [
                "bash",
                "-c",
                command,
                program,
                *FLAGS,
                f"--user-data-dir={self._profile.name}",
                f"--window-size={width},{height}",
                "about:blank",
            ],
            pass_fds=(read_commands, write_answers),
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
        )
        os.close(read_commands)
        os.close(write_answers)
        self._buffer = b""
        self._count = 0
        self._session: str | None = None
        self.requests: list[str] = []
        self.errors: list[str] = []
        targets = self.call("Target.getTargets")["targetInfos"]
        page = next(t["targetId"] for t in targets if t["type"] == "page")
        self._session = self.call("Target.attachToTarget", targetId=page, flatten=True)["sessionId"]
        for domain in ("Page", "Runtime", "Network", "Log"):
            self.call(f"{domain}.enable")

    def __enter__(self) -> Browser:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        try:
            self._session = None
            self.call("Browser.close")
            self._process.wait(10)
        except (OSError, RuntimeError, subprocess.TimeoutExpired):
            self._process.kill()
            self._process.wait(10)
        finally:
            os.close(self._out)
            os.close(self._in)
            self._profile.cleanup()

    def _message(self, deadline: float) -> dict[str, Any]:
        while b"\0" not in self._buffer:
            ready, _, _ = select.select([self._in], [], [], max(0.0, deadline - time.monotonic()))
            if not ready:
                raise RuntimeError("the browser did not answer in time")
            chunk = os.read(self._in, 1 << 16)
            if not chunk:
                raise RuntimeError("the browser ended")
            self._buffer += chunk
        raw, self._buffer = self._buffer.split(b"\0", 1)
        return json.loads(raw)

    def _note(self, message: dict[str, Any]) -> None:
        method, given = message.get("method"), message.get("params", {})
        if method == "Network.requestWillBeSent":
            self.requests.append(given["request"]["url"])
        elif method == "Runtime.exceptionThrown":
            detail = given["exceptionDetails"]
            self.errors.append(detail.get("exception", {}).get("description") or detail["text"])
        elif method == "Runtime.consoleAPICalled" and given["type"] in ("error", "warning", "assert"):
            self.errors.append(" ".join(str(a.get("value", a.get("description"))) for a in given["args"]))
        elif method == "Log.entryAdded" and given["entry"]["level"] in ("error", "warning"):
            self.errors.append(given["entry"]["text"])

    def call(self, method: str, timeout: float = 60.0, **params: Any) -> dict[str, Any]:
        self._count += 1
        number = self._count
        message = {"id": number, "method": method, "params": params}
        if self._session is not None:
            message["sessionId"] = self._session
        os.write(self._out, json.dumps(message).encode() + b"\0")
        deadline = time.monotonic() + timeout
        while True:
            answer = self._message(deadline)
            if answer.get("id") == number:
                if "error" in answer:
                    raise RuntimeError(f"{method}: {answer['error']['message']}")
                return answer["result"]
            self._note(answer)

    def run(self, script: str) -> Any:
        """Evaluate an expression (awaited when it is a promise) and return its value."""
        answer = self.call("Runtime.evaluate", expression=script, returnByValue=True, awaitPromise=True)
        if "exceptionDetails" in answer:
            detail = answer["exceptionDetails"]
            raise RuntimeError(detail.get("exception", {}).get("description") or detail["text"])
        return answer["result"].get("value")

    def open(self, path: Path) -> None:
        """Open a file and wait until its script says that it is ready."""
        self.call("Page.navigate", url=path.resolve().as_uri())
        self.wait("document.readyState === 'complete' && !!document.documentElement.dataset.ready")

    def wait(self, condition: str, seconds: float = 20.0) -> None:
        deadline = time.monotonic() + seconds
        while not self.run(condition):
            if time.monotonic() > deadline:
                raise RuntimeError(f"never true: {condition}; errors: {self.errors}")
            time.sleep(0.05)

    def key(self, name: str) -> None:
        codes = {"ArrowRight": 39, "ArrowLeft": 37, "ArrowUp": 38, "ArrowDown": 40, "Enter": 13, "Escape": 27, "Tab": 9}
        extra = {"text": "\r"} if name == "Enter" else {}
        for kind in ("keyDown", "keyUp"):
            self.call(
                "Input.dispatchKeyEvent",
                type=kind,
                key=name,
                code=name,
                windowsVirtualKeyCode=codes[name],
                **(extra if kind == "keyDown" else {}),
            )

    def move_mouse(self, x: float, y: float) -> None:
        self.call("Input.dispatchMouseEvent", type="mouseMoved", x=x, y=y)

    def screenshot(self, path: Path, full: bool = True) -> Path:
        data = self.call("Page.captureScreenshot", format="png", captureBeyondViewport=full)["data"]
        path.write_bytes(base64.b64decode(data))
        return path
