"""The over-read page as a person meets it: its command, and what a browser does and sees there."""

import contextlib
import os
import re
import socket
import subprocess
import sys
import time
import urllib.parse
from pathlib import Path

CHROMIUM = Path("/usr/bin/chromium")
# a name that someone made to point here (DNS rebinding)
FOREIGN = ("--host-resolver-rules=MAP rebound.example 127.0.0.1",)
LAPTOP, TABLET = {"width": 1280, "height": 720}, {"width": 820, "height": 1180}


def opened(page, address):
    page.goto(address)
    page.wait_for_selector("#intervals tr")
    page.wait_for_selector("#paper .trace", state="attached")


def qrs(page):
    return page.inner_text('#intervals tr[data-key="qrs_ms"] td:nth-child(2)')


def milliseconds(page):
    return int(re.match(r"\d+", qrs(page)).group())


def done(page, count):
    """Wait until so many corrections are in force."""
    page.wait_for_function(
        "n => document.querySelectorAll('#corrections .was').length === n", arg=count
    )


def on_screen(page, panel, share, below_mm=0.0):
    """Where on the screen a place of a panel's trace lies, at a share of its length."""
    return page.evaluate(
        """([number, share, below]) => import("/page/paper.js").then(async () => {
          const path = document.querySelectorAll("#paper .trace:not(.doubtful)")[number];
          const at = path.getPointAtLength(path.getTotalLength() * share);
          const p = new DOMPoint(at.x, at.y + below)
            .matrixTransform(document.getElementById("paper").getScreenCTM());
          return [p.x, p.y];
        })""",
        [panel, share, below_mm],
    )


def first_name(page):
    return page.locator("#paper .name").first.text_content()


def rename(page, lead):
    page.focus("#paper")
    page.keyboard.press("p")
    page.fill("#lead", lead)
    page.press("#lead", "Enter")


@contextlib.contextmanager
def command(file):
    """`measure overread FILE` as a process of its own, and the address that it prints."""
    start = "from measure.cli import main; main()"
    line = [sys.executable, "-c", start, "overread", "--no-browser", file]
    env = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[3])}
    with subprocess.Popen(line, stdout=subprocess.PIPE, text=True, env=env) as server:
        try:
            address = server.stdout.readline().split()[-1]
            wait_until_open(urllib.parse.urlsplit(address))
            yield server, address
        finally:
            server.kill()


def wait_until_open(place, seconds=30.0):
    """The address is told just before the server listens."""
    until = time.monotonic() + seconds
    while True:
        try:
            socket.create_connection((place.hostname, place.port), timeout=1.0).close()
            return
        except OSError:
            if time.monotonic() > until:
                raise
            time.sleep(0.1)
