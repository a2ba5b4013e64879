"""The command that serves the pages: this machine only, no question, no report home, and a clean end."""

import os
import re
import signal
import socket
import subprocess
import sys
import urllib.request
from pathlib import Path

import pytest

from farvolt.errors import FarvoltError
from farvolt_app import server

START = "import sys; from farvolt_app import server; sys.exit(server.serve(None, open_browser={}))"

DIRECT = urllib.request.build_opener(urllib.request.ProxyHandler({}))


def started(browser: str, folder: Path) -> tuple["subprocess.Popen[str]", str]:
    """The pages being served by a process of their own, and the address it said."""
    environment = (
        {**os.environ, "BROWSER": browser, "HOME": str(folder)} if browser else {**os.environ, "HOME": str(folder)}
    )
    process = subprocess.Popen(
        [sys.executable, "-c", START.format(bool(browser))], stdin=subprocess.DEVNULL, stdout=subprocess.PIPE,
        stderr=subprocess.PIPE, text=True, env=environment, cwd=folder,
    )  # fmt: skip
    assert process.stderr is not None
    said = process.stderr.readline()
    found = re.search(r"http://127\.0\.0\.1:\d+", said)
    assert found, said + process.stderr.read()
    return process, found[0]


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_it_says_its_address_serves_and_ends_with_the_command(number: signal.Signals, tmp_path: Path) -> None:
    process, address = started("", tmp_path)
    try:
        with DIRECT.open(f"{address}/_stcore/health", timeout=20) as answer:
            assert answer.status == 200
    finally:
        process.send_signal(number)
        output, errors = process.communicate(timeout=30)
    assert process.returncode == 0
    assert output == ""
    assert "Traceback" not in errors
    with pytest.raises(OSError, match="refused"):
        DIRECT.open(f"{address}/_stcore/health", timeout=20)
    assert not (tmp_path / ".streamlit").exists()  # nothing is kept in the user's home


def test_the_browser_is_opened_on_the_address(tmp_path: Path) -> None:
    opened = tmp_path / "opened"
    browser = tmp_path / "browser"
    browser.write_text(f'#!/bin/sh\necho "$1" > {opened}.part && mv {opened}.part {opened}\n')
    browser.chmod(0o755)
    process, address = started(str(browser), tmp_path)
    try:
        for _ in range(200):
            if opened.exists():
                break
            try:
                process.wait(timeout=0.1)
            except subprocess.TimeoutExpired:
                continue
        assert opened.read_text().strip() == address
    finally:
        process.send_signal(signal.SIGINT)
        process.communicate(timeout=30)


def test_the_command_asks_nothing_and_reports_nothing() -> None:
    command = server.command(1234, "127.0.0.1")
    given = dict(zip(command[5::2], command[6::2], strict=True))
    assert given["--server.headless"] == "true"
    assert given["--server.showEmailPrompt"] == "false"
    assert given["--browser.gatherUsageStats"] == "false"
    assert given["--server.address"] == "127.0.0.1"
    assert given["--client.showErrorDetails"] == "none"
    assert given["--client.showErrorLinks"] == "false"


def test_every_setting_is_known_to_the_library() -> None:
    from streamlit import config

    config.get_config_options()
    command = server.command(1234, "127.0.0.1")
    for name in command[5::2]:
        assert name.removeprefix("--") in config._config_options_template


def test_a_port_in_use_is_said() -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        port = taken.getsockname()[1]
        with pytest.raises(FarvoltError, match=f"port {port} on 127.0.0.1 is in use"):
            server.serve(None, port=port, open_browser=False)


def test_an_address_of_another_machine_is_said() -> None:
    with pytest.raises(FarvoltError, match="cannot be listened on"):
        server.serve(None, address="192.0.2.1", open_browser=False)
    with pytest.raises(FarvoltError, match="cannot be listened on"):
        server.serve(None, address="no such address", open_browser=False)


@pytest.mark.parametrize(
    ("address", "expected"),
    [("127.0.0.1", "http://127.0.0.1:80"), ("0.0.0.0", "http://127.0.0.1:80"), ("::1", "http://[::1]:80")],
)
def test_the_address_for_a_browser(address: str, expected: str) -> None:
    assert server.url(80, address) == expected


def test_without_a_screen_no_browser_takes_over_the_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("DISPLAY", "WAYLAND_DISPLAY", "BROWSER"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setattr(sys, "platform", "linux")
    monkeypatch.setattr("webbrowser.open", lambda _url: pytest.fail("a browser was opened"))
    assert server._open("http://127.0.0.1:1") is False


def test_starting_the_pages_waits_for_no_heavy_library() -> None:
    heavy = "[name for name in ('numpy', 'pydantic', 'streamlit') if name in sys.modules]"
    code = f"import sys; import farvolt_app.server; print({heavy})"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"
