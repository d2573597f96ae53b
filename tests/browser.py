"""A headless Chromium for tests that look at pages as a reader does.

Spoken to over pipes in the browser's own protocol, so that nothing listens on the network.
"""

import base64
import json
import os
import re
import shutil
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--hide-scrollbars", "--remote-debugging-pipe",
)  # fmt: skip
PATIENCE = 60  # s, after which a browser counts as stuck
A4 = {"paperWidth": 8.27, "paperHeight": 11.69, "preferCSSPageSize": True, "printBackground": True}
A4_COLUMN = 695  # CSS pixels between the margins of the page, 184 mm

Json = dict[str, Any]


def why_not() -> str | None:
    """Why there can be no browser here, in plain words."""
    return None if shutil.which("chromium") else "chromium is not installed (deploy/setup --dev)"


@contextmanager
def browser(profile: Path) -> Iterator["Browser"]:
    """A browser with a fresh profile, gone afterwards."""
    commands_out, commands_in = os.pipe()
    answers_out, answers_in = os.pipe()
    # The browser reads descriptor 3 and writes descriptor 4.
    program = f'exec "$0" "$@" 3<&{commands_out} 4>&{answers_in}'
    process = subprocess.Popen(
        ["bash", "-c", program, "chromium", *FLAGS, f"--user-data-dir={profile}", "about:blank"],
        pass_fds=(commands_out, answers_in),
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    os.close(commands_out)
    os.close(answers_in)
    found = Browser(commands_in, answers_out)
    try:
        yield found
        found.call("Browser.close")
        process.wait(PATIENCE)
    finally:
        process.kill()
        process.wait(PATIENCE)
        os.close(commands_in)
        os.close(answers_out)


class Browser:
    """commands, answers : descriptors of the pipes to and from it"""

    def __init__(self, commands: int, answers: int) -> None:
        self._commands, self._answers = commands, answers
        self._number = 0
        self._buffer = b""
        self._events: list[Json] = []

    def open(self, address: str, width: int, height: int = 900) -> "Page":
        """A page in a window of this size, loaded."""
        target = self.call("Target.createTarget", url="about:blank")["targetId"]
        session = self.call("Target.attachToTarget", targetId=target, flatten=True)["sessionId"]
        page = Page(self, session)
        page.resize(width, height)
        for domain in ("Network", "Page", "Accessibility"):
            page.call(f"{domain}.enable")
        page.call("Page.navigate", url=address)
        while not any(e["method"] == "Page.loadEventFired" for e in self._events):
            self._events.append(self._read())
        page.requests = [
            event["params"]["request"]["url"]
            for event in self._events
            if event["method"] == "Network.requestWillBeSent"
        ]
        self._events.clear()
        return page

    def call(self, method: str, session: str | None = None, /, **parameters: Any) -> Json:
        """Send a command and wait for its answer; events that come meanwhile are kept."""
        self._number += 1
        command = {"id": self._number, "method": method, "params": parameters}
        if session is not None:
            command["sessionId"] = session
        data = json.dumps(command).encode() + b"\0"
        while data:
            data = data[os.write(self._commands, data) :]
        while (answer := self._read()).get("id") != self._number:
            self._events.append(answer)
        if "error" in answer:
            raise RuntimeError(f"{method}: {answer['error']}")
        found: Json = answer["result"]
        return found

    def _read(self) -> Json:
        while b"\0" not in self._buffer:
            piece = os.read(self._answers, 1 << 16)
            if not piece:
                raise RuntimeError("the browser is gone")
            self._buffer += piece
        message, self._buffer = self._buffer.split(b"\0", 1)
        found: Json = json.loads(message)
        return found


@dataclass
class Page:
    """requests : addresses that the page asked for while it was loaded"""

    _browser: Browser
    _session: str
    requests: list[str] = field(default_factory=list)

    def call(self, method: str, **parameters: Any) -> Json:
        return self._browser.call(method, self._session, **parameters)

    def resize(self, width: int, height: int = 900) -> None:
        self.call("Emulation.setDeviceMetricsOverride", width=width, height=height,
                  deviceScaleFactor=1, mobile=width < 600)  # fmt: skip

    def as_on_paper(self) -> None:
        """From now on as printed, between the margins of an A4 page."""
        self.call("Emulation.setEmulatedMedia", media="print")
        self.resize(A4_COLUMN)

    def evaluate(self, expression: str) -> Any:
        found = self.call("Runtime.evaluate", expression=expression, returnByValue=True)
        assert "exceptionDetails" not in found, found["exceptionDetails"]
        return found["result"].get("value")

    def roles(self) -> list[tuple[str, str]]:
        """Role and name of everything that assistive programs are told of."""
        nodes = self.call("Accessibility.getFullAXTree")["nodes"]
        return [
            (node["role"]["value"], node.get("name", {}).get("value", ""))
            for node in nodes
            if not node["ignored"]
        ]

    def screenshot(self) -> bytes:
        shot = self.call("Page.captureScreenshot", captureBeyondViewport=True)
        return base64.b64decode(shot["data"])

    def pdf(self) -> bytes:
        return base64.b64decode(self.call("Page.printToPDF", **A4)["data"])


def page_count(pdf: bytes) -> int:
    return len(re.findall(rb"/Type\s*/Page\b", pdf))


# Elements that stick out of the window, but for what scrolls within itself.
OVERFLOW = """
[...document.querySelectorAll("body *")]
  .filter(e => e.getClientRects().length
    && ![...ancestors(e)].some(a => /auto|scroll|hidden/.test(getComputedStyle(a).overflowX)
                                    || a.tagName === "svg"))
  .filter(e => e.getBoundingClientRect().right > document.documentElement.clientWidth + 1)
  .map(e => e.outerHTML.slice(0, 120));
function* ancestors(e) { for (let a = e.parentElement; a; a = a.parentElement) yield a; }
"""

# Text whose contrast with what is behind it is too small: W3C, Web Content Accessibility Guidelines
# 2.2, success criterion 1.4.3, with its definitions of relative luminance and large text.
LOW_CONTRAST = """
(() => {
  const rgba = text => text.match(/[\\d.]+/g).map(Number);
  const channel = c => (c /= 255) <= 0.04045 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4;
  const luminance = c => 0.2126 * channel(c[0]) + 0.7152 * channel(c[1]) + 0.0722 * channel(c[2]);
  const behind = e => {
    for (; e; e = e.parentElement) {
      const c = rgba(getComputedStyle(e).backgroundColor);
      if (c.length < 4 || c[3] > 0) return c;
    }
    return [255, 255, 255];
  };
  const walker = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
  const low = [];
  let seen = 0;
  for (let node; node = walker.nextNode();) {
    const e = node.parentElement, style = getComputedStyle(e);
    if (!node.data.trim() || !e.getClientRects().length) continue;
    seen += 1;
    const ink = rgba(e.closest("svg") ? style.fill : style.color);
    const [a, b] = [luminance(ink), luminance(behind(e))].sort((p, q) => q - p);
    const size = parseFloat(style.fontSize);
    const large = size >= 24 || (size >= 18.66 && style.fontWeight >= 700);
    const ratio = (a + 0.05) / (b + 0.05);
    if (ratio < (large ? 3 : 4.5)) low.push(`${ratio.toFixed(2)} ${node.data.trim()}`);
  }
  return {seen, low};
})()
"""
