"""A headless browser for the tests: loads a page from this machine, and tells what it asked for and said."""

import json
import re
import shutil
import subprocess
import tempfile
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path
from queue import Empty, Queue
from typing import Any

import pytest

NAMES = ("chromium", "chromium-browser", "google-chrome", "chrome")
BROWSER = next(filter(None, map(shutil.which, NAMES)), None)
PATIENCE_S = 90.0

needs_browser = pytest.mark.skipif(
    BROWSER is None, reason=f"none of {', '.join(NAMES)} is on this machine: install Debian's chromium"
)

_OPTIONS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--no-proxy-server",
    "--disable-background-networking", "--disable-component-update", "--disable-sync", "--mute-audio",
    "--autoplay-policy=no-user-gesture-required", "--enable-logging=stderr", "--hide-scrollbars",
)  # fmt: skip
_CONSOLE = re.compile(r':CONSOLE(?:\(\d+\)|:\d+)\] (".*)')


@dataclass(frozen=True, slots=True, kw_only=True)
class Site:
    """A site on this machine: pages by their path, what was asked for, and what a page's script told."""

    address: str
    asked: list[str] = field(default_factory=list)
    told: "Queue[Any]" = field(default_factory=Queue)


@contextmanager
def site(pages: dict[str, str]) -> Iterator[Site]:
    """Serve pages until the block ends. A script tells the test something by a POST of JSON to /told."""

    class Handler(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            shown.asked.append(self.path)
            content = pages.get(self.path, "").encode("utf-8")
            self.send_response(200 if self.path in pages else 404)
            self.send_header("Content-Type", "text/html")
            self.send_header("Content-Length", str(len(content)))
            self.end_headers()
            self.wfile.write(content)

        def do_POST(self) -> None:
            shown.told.put(json.loads(self.rfile.read(int(self.headers["Content-Length"]))))
            self.send_response(204)
            self.end_headers()

        def log_message(self, *_: object) -> None:
            """Say nothing."""

    server = ThreadingHTTPServer(("127.0.0.1", 0), Handler)
    shown = Site(address=f"http://127.0.0.1:{server.server_port}")
    thread = threading.Thread(target=server.serve_forever, daemon=True)
    thread.start()
    try:
        yield shown
    finally:
        server.shutdown()
        server.server_close()
        thread.join()


def console_of(address: str) -> list[str]:
    """Load a page and return what stands on its console then, errors among it."""
    return _CONSOLE.findall(_run("--dump-dom", address))


def told_by(shown: Site, path: str) -> tuple[Any, list[str]]:
    """Load a page whose script tells something; return that, and what stands on the console by then."""
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as profile, tempfile.TemporaryFile() as log:
        command = [str(BROWSER), *_OPTIONS, f"--user-data-dir={profile}", "--remote-debugging-port=0"]
        process = subprocess.Popen([*command, shown.address + path], stdout=log, stderr=log)
        try:
            told = shown.told.get(timeout=PATIENCE_S)
        except Empty:
            told = None
        finally:
            process.terminate()
            process.wait(PATIENCE_S)
        log.seek(0)
        return told, _CONSOLE.findall(log.read().decode("utf-8", "replace"))


def print_page(address: str, target: Path) -> None:
    """Print a page to a PDF, on the paper that it asks for or else on US Letter."""
    _run(f"--print-to-pdf={target}", "--no-pdf-header-footer", address)


def _run(*arguments: str) -> str:
    """Run the browser once with an empty profile, and return what it says of itself."""
    with tempfile.TemporaryDirectory(ignore_cleanup_errors=True) as profile:
        command = [str(BROWSER), *_OPTIONS, f"--user-data-dir={profile}", *arguments]
        ran = subprocess.run(command, capture_output=True, check=False, timeout=PATIENCE_S)
    return ran.stderr.decode("utf-8", "replace")
