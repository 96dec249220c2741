"""The lab: one address, for this machine alone, and no server left behind."""

from __future__ import annotations

import os
import re
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import pytest

from windkit.faces import command
from windkit.study.errors import StudyError
from windkit.study.shipped import make_study

LAUNCHER = """
import os, sys
from windkit.faces.command import attend
sys.exit(attend([sys.executable, "-c", sys.argv[1]], os.environ))
"""
#: Stands in for the server: says who it is, then stays.
SERVER = """
import os, signal, time
{trap}
print(os.getpid(), flush=True)
time.sleep(60)
"""
STUBBORN = "signal.signal(signal.SIGTERM, signal.SIG_IGN)"

posix = pytest.mark.skipif(os.name != "posix", reason="signals as POSIX has them")


def _lives(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    return True


def _launched(server: str, before: str = "") -> tuple[subprocess.Popen[str], int]:
    launcher = subprocess.Popen(
        [sys.executable, "-c", before + LAUNCHER, server], stdout=subprocess.PIPE, text=True
    )
    assert launcher.stdout is not None
    return launcher, int(launcher.stdout.readline())


@posix
@pytest.mark.parametrize(
    ("number", "code"), [(signal.SIGTERM, 143), (signal.SIGINT, 130), (signal.SIGHUP, 129)]
)
def test_a_signal_to_the_launcher_ends_the_server(number: int, code: int) -> None:
    launcher, server = _launched(SERVER.format(trap=""))
    assert _lives(server)
    launcher.send_signal(number)
    assert launcher.wait(20) == code
    assert not _lives(server)


@posix
def test_a_server_that_will_not_end_is_made_to() -> None:
    hurry = "import windkit.faces.command as c; c._PATIENCE_S = 0.3\n"
    launcher, server = _launched(SERVER.format(trap=STUBBORN), hurry)
    launcher.terminate()
    assert launcher.wait(20) == 143
    assert not _lives(server)


def test_a_server_that_ends_by_itself_gives_its_code() -> None:
    began = time.monotonic()
    assert command.attend([sys.executable, "-c", "raise SystemExit(3)"], os.environ) == 3
    assert time.monotonic() - began < 10
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_the_lab_gives_one_address_and_keeps_its_token_to_itself(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    ran = []
    monkeypatch.setattr(command, "attend", lambda *given: ran.append(given) or 0)
    folder = make_study(tmp_path / "study", demo=False)
    monkeypatch.setattr("windkit.study.folder.open_study", lambda _: _Opened(folder))
    assert command.main(["lab", str(folder), "--no-browser"]) == 0
    (arguments, environment), said = ran[0], capsys.readouterr().out
    addresses = re.findall(r"http://127\.0\.0\.1:(\d+)/lab\?token=(\S+)", said)
    assert len(addresses) == said.count("http") == 1
    port, token = addresses[0]
    assert environment["JUPYTER_TOKEN"] == token
    assert not any(token in argument for argument in arguments)
    assert f"--port={port}" in arguments
    assert "--ip=127.0.0.1" in arguments
    assert not any("allow_origin" in argument for argument in arguments)


class _Opened:
    def __init__(self, folder: Path) -> None:
        self.folder = folder


def test_a_taken_port_is_passed_over() -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        first = taken.getsockname()[1]
        assert first < command.free_port(first) < first + 50


def test_no_free_port_is_said_with_a_remedy() -> None:
    with pytest.raises(StudyError, match=r"[Nn]o port from 70000 on is free"):
        command.free_port(70_000)


def test_progress_is_a_line_a_workbook_where_there_is_no_terminal(
    capsys: pytest.CaptureFixture[str],
) -> None:
    progress = command._Progress()
    for done in range(4):
        progress("1_site_screening", done, 3)
    progress("2_measured_data", 0, 5)
    progress.close()
    assert capsys.readouterr().err.splitlines() == [
        "running 1_site_screening, 3 cells",
        "running 2_measured_data, 5 cells",
    ]
