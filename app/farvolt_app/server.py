"""Starts the web pages on this machine, says where they are, and ends with Ctrl+C. Nothing is asked, nothing sent."""

import contextlib
import os
import signal
import socket
import subprocess
import sys
import tempfile
import time
import urllib.error
import urllib.request
import webbrowser
from collections.abc import Iterator
from pathlib import Path
from types import FrameType

from farvolt.errors import FarvoltError

PLAN_VARIABLE = "FARVOLT_PLAN"
"""Environment variable that carries the path of the plan to the pages."""

FOLDER_VARIABLE = "FARVOLT_DRAFTS"
"""Environment variable with the folder where the pages keep drafts until the command ends and removes it."""

ENTRY = Path(__file__).parent / "pages" / "entry.py"
WAIT_SECONDS = 60
_EVERYWHERE = ("0.0.0.0", "::", "")

_SETTINGS = {
    "server.headless": "true",
    "server.showEmailPrompt": "false",
    "server.fileWatcherType": "none",
    "browser.gatherUsageStats": "false",
    "client.toolbarMode": "minimal",
    "client.showErrorDetails": "none",
    "client.showErrorLinks": "false",
    "logger.level": "error",
}
_THEME = {
    "theme.baseRadius": "small",
    "theme.paddingTop": "1rem",
    "theme.showWidgetBorder": "true",
    "theme.light.primaryColor": "#8a4b14",
    "theme.light.backgroundColor": "#ffffff",
    "theme.light.secondaryBackgroundColor": "#f4f1ec",
    "theme.light.textColor": "#14171b",
    "theme.dark.primaryColor": "#e0924a",
    "theme.dark.backgroundColor": "#16191d",
    "theme.dark.secondaryBackgroundColor": "#22272d",
    "theme.dark.textColor": "#e8e6e3",
}


def serve(
    plan_path: Path | None, *, port: int | None = None, address: str = "127.0.0.1", open_browser: bool = True
) -> int:
    """Serve the pages until they are ended, and return the exit code. Raises FarvoltError: the port is taken."""
    chosen = port or free_port(address)
    if port is not None and not _is_free(port, address):
        raise FarvoltError(f"port {port} on {address} is in use; name another one, or none to have a free one chosen")
    with _ended_by_signals(), tempfile.TemporaryDirectory(prefix="farvolt-") as folder:
        environment = environment_for(plan_path, folder)
        process = subprocess.Popen(command(chosen, address), env=environment, stdout=subprocess.DEVNULL)
        try:
            return _run(process, chosen, address, open_browser)
        except KeyboardInterrupt:
            print("Ended.", file=sys.stderr)
            return 0
        finally:
            _end(process)


def command(port: int, address: str) -> list[str]:
    """The command line that starts the pages."""
    settings = [*_SETTINGS.items(), *_THEME.items(), ("server.port", str(port)), ("server.address", address)]
    if address not in _EVERYWHERE:
        # A page elsewhere must not reach these through a name of its own that leads to this machine.
        settings += [("server.allowedHosts", host) for host in (address, "localhost")]
    flags = [part for name, value in settings for part in (f"--{name}", value)]
    return [sys.executable, "-m", "streamlit", "run", str(ENTRY), *flags]


def url(port: int, address: str) -> str:
    """Where a browser on this machine finds the pages."""
    host = "127.0.0.1" if address in _EVERYWHERE else address
    return f"http://[{host}]:{port}" if ":" in host else f"http://{host}:{port}"


def free_port(address: str) -> int:
    """A port that nothing listens on. Raises FarvoltError where the address is not one of this machine."""
    with _socket(address) as one:
        try:
            one.bind((address, 0))
        except OSError as error:
            raise FarvoltError(f"{address} cannot be listened on ({error.strerror}); accepted: 127.0.0.1") from None
        return int(one.getsockname()[1])


def _is_free(port: int, address: str) -> bool:
    with _socket(address) as one:
        one.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        try:
            one.bind((address, port))
        except OSError:
            return False
        return True


def _socket(address: str) -> socket.socket:
    return socket.socket(socket.AF_INET6 if ":" in address else socket.AF_INET)


def environment_for(plan_path: Path | None, folder: str) -> dict[str, str]:
    """The environment of the pages: the plan to open, and the folder where drafts are kept meanwhile."""
    known = {name: value for name, value in os.environ.items() if name != PLAN_VARIABLE}
    known[FOLDER_VARIABLE] = folder
    known.setdefault("OPENBLAS_NUM_THREADS", "1")  # a plan's matrices are small: threads only wait for each other
    return known | ({PLAN_VARIABLE: str(plan_path.absolute())} if plan_path else {})


def _run(process: subprocess.Popen[bytes], port: int, address: str, open_browser: bool) -> int:
    where = url(port, address)
    if not _answers(process, where):
        raise FarvoltError(f"the pages did not start on {where}")
    print(f"Farvolt is at {where}  (Ctrl+C ends it)", file=sys.stderr, flush=True)
    if address not in ("127.0.0.1", "::1", "localhost"):
        print("Anybody who can reach this machine's network can open and change it there.", file=sys.stderr)
    if open_browser and not _open(where):
        print("No browser could be opened; open the address yourself.", file=sys.stderr, flush=True)
    return process.wait()


def _answers(process: subprocess.Popen[bytes], where: str) -> bool:
    """Whether the pages answer, before they end or the wait is over. No proxy stands between."""
    opener = urllib.request.build_opener(urllib.request.ProxyHandler({}))
    deadline = time.monotonic() + WAIT_SECONDS
    while process.poll() is None and time.monotonic() < deadline:
        with contextlib.suppress(urllib.error.URLError, OSError), opener.open(f"{where}/_stcore/health", timeout=2):
            return True
        time.sleep(0.1)
    return False


def _open(where: str) -> bool:
    """Open the browser, unless only one within the terminal could be."""
    no_screen = sys.platform.startswith("linux") and not any(
        os.environ.get(name) for name in ("DISPLAY", "WAYLAND_DISPLAY", "BROWSER")
    )
    return not no_screen and webbrowser.open(where)


@contextlib.contextmanager
def _ended_by_signals() -> Iterator[None]:
    """Make a request to end look like Ctrl+C, so that the pages end with the command that started them."""

    def interrupt(_number: int, _frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    before = signal.signal(signal.SIGTERM, interrupt)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


def _end(process: subprocess.Popen[bytes]) -> None:
    if process.poll() is None:
        process.terminate()
        try:
            process.wait(timeout=5)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
