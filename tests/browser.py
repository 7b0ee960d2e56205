"""A browser without a window, to see a page as its reader does; tests skip where the machine has none."""

from __future__ import annotations

import http.server
import json
import os
import re
import shutil
import subprocess
import threading
from html import unescape
from pathlib import Path
from typing import Any

import pytest

BROWSER = next(filter(None, map(shutil.which, ("chromium", "chromium-browser", "google-chrome"))), None)
needs_browser = pytest.mark.skipif(BROWSER is None, reason="no Chromium is installed")
OPTIONS = ["--headless", "--disable-gpu", "--hide-scrollbars", "--no-first-run", "--disable-background-networking",
           "--disable-component-update", "--disable-sync", "--disable-default-apps",
           "--virtual-time-budget=4000"]  # fmt: skip


def run(url: str, profile: Path, *options: str) -> subprocess.CompletedProcess[str]:
    """Open an address and wait until the page is done."""
    assert BROWSER is not None
    as_root = ["--no-sandbox"] if os.geteuid() == 0 else []
    command = [BROWSER, *OPTIONS, *as_root, f"--user-data-dir={profile}", *options, url]
    return subprocess.run(command, capture_output=True, text=True, timeout=120, check=True)


def dom(page: Path, profile: Path, *options: str) -> str:
    """The document as it stands once the page is done."""
    return run(page.resolve().as_uri(), profile, "--dump-dom", *options).stdout


def ask(page: Path, profile: Path, width: int, script: str, *options: str, scripts: bool = True) -> Any:
    """What a script finds in a page shown `width` pixels wide; the page itself, its policy too, stays as it is.

    The script sees `view` (the page's window) and `page` (its document) and returns what JSON can hold. Without
    `scripts` the page's own are not run.
    """
    kept = "" if scripts else ' sandbox="allow-same-origin"'
    text = json.dumps(page.read_text(encoding="utf-8")).replace("<", "\\u003c")
    driver = profile.parent / f"{profile.name}-driver.html"
    driver.write_text(
        f"""<!DOCTYPE html><meta charset="utf-8"><meta name="color-scheme" content="light dark">
<style>body{{margin:0}}iframe{{border:0}}</style>
<iframe id="frame" width="{width}" height="900"{kept}></iframe><pre id="found"></pre>
<script>
const frame = document.getElementById("frame");
frame.onload = () => {{
  const view = frame.contentWindow, page = frame.contentDocument;
  const found = (() => {{ {script} }})();
  document.getElementById("found").textContent = "found" + JSON.stringify(found);
}};
frame.srcdoc = {text};
</script>""",
        encoding="utf-8",
    )
    shown = dom(driver, profile, f"--window-size={max(width, 600)},900", *options)
    answer = re.search(r'<pre id="found">found(.*?)</pre>', shown, re.DOTALL)
    assert answer, "the page never answered"
    return json.loads(unescape(answer[1]))


class Listener:
    """A proxy that answers nothing but one page, and remembers what else was asked of it."""

    def __init__(self, page: str) -> None:
        self.asked: list[str] = []
        content = page.encode("utf-8")
        asked = self.asked

        class Handler(http.server.BaseHTTPRequestHandler):
            def do_GET(self) -> None:  # noqa: N802 - the name the library calls
                asked.append(self.path)
                self.send_response(200 if self.path.endswith("/report.html") else 404)
                self.send_header("Content-Type", "text/html; charset=utf-8")
                self.end_headers()
                if self.path.endswith("/report.html"):
                    self.wfile.write(content)

            def do_CONNECT(self) -> None:  # noqa: N802 - the name the library calls
                asked.append(self.path)
                self.send_error(403)

            def log_message(self, *_: object) -> None:
                pass

        self._server = http.server.ThreadingHTTPServer(("127.0.0.1", 0), Handler)
        threading.Thread(target=self._server.serve_forever, daemon=True).start()

    @property
    def address(self) -> str:
        return f"127.0.0.1:{self._server.server_address[1]}"

    def close(self) -> None:
        self._server.shutdown()
        self._server.server_close()
