"""The command `sitestudy`: make a study, run it, open it.

Each verb calls one function of the study floor and says what came of it. Faults a person can put
right go to stderr as one message with exit code 2; nothing here computes.
"""

from __future__ import annotations

import argparse
import ast
import os
import secrets
import shutil
import signal
import socket
import subprocess
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import windkit
from windkit.study.errors import StudyError

__all__ = ["main"]

EXIT_BAD_INPUT = 2
EXIT_STOPPED = 130

#: The lab is served to this machine alone.
LOOPBACK = "127.0.0.1"
_PORTS_TRIED = 50
#: How long a server may take to end before it is made to [s].
_PATIENCE_S = 10.0


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; returns the exit code."""
    parser = _parser()
    chosen = parser.parse_args(arguments)
    try:
        code: int = chosen.act(chosen)
    except StudyError as error:
        print(f"sitestudy: {error}", file=sys.stderr)
        return EXIT_BAD_INPUT
    except OSError as error:
        print(f"sitestudy: {error.strerror}: {error.filename}", file=sys.stderr)
        return EXIT_BAD_INPUT
    except KeyboardInterrupt:
        print("\nsitestudy: stopped; finished steps keep their results", file=sys.stderr)
        return EXIT_STOPPED
    return code


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="sitestudy",
        description="Wind-site studies as workbooks: from a mast record to P50 and P90.",
    )
    parser.add_argument("--version", action="version", version=f"sitestudy {windkit.__version__}")
    verbs = parser.add_subparsers(title="commands", required=True, metavar="COMMAND")

    new = verbs.add_parser(
        "new",
        help="lay out a study folder to adapt",
        description="Lay out a study folder: template workbooks, a commented study.toml, an empty "
        "ledger, a data/ folder for the client's files.",
    )
    new.add_argument("folder", metavar="DIR", help="folder to make; nothing is overwritten")
    new.add_argument("--demo", action="store_true", help="fill it with the demo study")
    new.add_argument(
        "--from",
        dest="from_file",
        metavar="FILE",
        help="draft the mast's section from a data file, or from a station description (JSON, IEA "
        "Wind Task 43); what no file tells is marked ASK",
    )
    new.set_defaults(act=_new)

    run = verbs.add_parser(
        "run",
        help="execute the workbooks and write the handover",
        description="Execute a study's workbooks in order, then write its handover: report.html, "
        "tables.xlsx, results.json and the executed workbooks.",
    )
    run.add_argument("folder", metavar="DIR", help="study folder")
    run.add_argument(
        "--from",
        dest="from_step",
        metavar="STEP",
        help="begin at this step (screen, measure, long_term, yield, uncertainty, conditions); "
        "those before it must be up to date",
    )
    run.add_argument(
        "--set",
        dest="settings",
        metavar="WORKBOOK.NAME=VALUE",
        action="append",
        default=[],
        help="set a workbook's parameter for this run, e.g. 4_energy_yield.hub_height_m=120; "
        "may be repeated",
    )
    run.add_argument("--quiet", action="store_true", help="no progress, only the result")
    run.set_defaults(act=_run)

    lab = verbs.add_parser(
        "lab",
        help="open a study in JupyterLab on this machine",
        description="Open a study in JupyterLab, served on the loopback address only, behind a "
        "token made for this session.",
    )
    lab.add_argument("folder", metavar="DIR", help="study folder")
    lab.add_argument("--no-browser", action="store_true", help="print the address, open nothing")
    lab.add_argument("--port", type=int, default=8888, help="first port to try (default 8888)")
    lab.set_defaults(act=_lab)
    return parser


def _new(chosen: argparse.Namespace) -> int:
    from windkit.study.shipped import make_study

    folder = make_study(chosen.folder, demo=chosen.demo, from_file=chosen.from_file)
    print(f"made {chosen.folder}/")
    if chosen.from_file is not None:
        asked = (folder / "study.toml").read_text(encoding="utf-8").count("# ASK")
        print(f"the mast is drafted from {chosen.from_file}; {asked} questions are marked ASK")
        print("next: answer them and fill in the rest of study.toml, then")
        print(f"      {_own_name()} run {chosen.folder}")
    elif chosen.demo:
        print(f"next: {_own_name()} run {chosen.folder}")
    else:
        print(f"next: put the client's files into {folder.name}/data/, fill in study.toml, then")
        print(f"      {_own_name()} run {chosen.folder}")
    return 0


def _run(chosen: argparse.Namespace) -> int:
    from windkit.faces.handover import build_handover
    from windkit.faces.views import exceedance_text
    from windkit.study.running import run_study

    progress = None if chosen.quiet else _Progress()
    try:
        study = run_study(
            chosen.folder,
            from_step=chosen.from_step,
            parameters=_parameters(chosen.settings),
            progress=progress,
        )
    finally:
        if progress is not None:
            progress.close()
    handover = build_handover(study)
    print(exceedance_text(handover.results))
    print(f"\nreport: {_shown(handover.report)}")
    return 0


def _lab(chosen: argparse.Namespace) -> int:
    from windkit.study.folder import open_study

    study = open_study(chosen.folder)
    port = free_port(chosen.port)
    # The token goes by the environment, so that it shows in no process list.
    token = secrets.token_urlsafe(24)
    command = [
        sys.executable, "-m", "jupyterlab", f"--ip={LOOPBACK}", f"--port={port}",
        "--ServerApp.port_retries=0", f"--ServerApp.root_dir={study.folder}", "--log-level=ERROR",
        "--LabApp.log_level=ERROR",
    ]  # fmt: skip
    if chosen.no_browser:
        command.append("--no-browser")
    if hasattr(os, "geteuid") and os.geteuid() == 0:
        command.append("--allow-root")
    print(f"http://{LOOPBACK}:{port}/lab?token={token}")
    print("open for as long as this command runs; Ctrl+C ends it", flush=True)
    return attend(command, {**os.environ, "JUPYTER_TOKEN": token})


def free_port(first: int) -> int:
    """The first free port from `first` on, on the loopback address."""
    for port in range(first, min(first + _PORTS_TRIED, 65_536)):
        with socket.socket(socket.AF_INET, socket.SOCK_STREAM) as trial:
            if os.name == "posix":  # a port that was closed a moment ago is free
                trial.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
            try:
                trial.bind((LOOPBACK, port))
            except OSError:
                continue
            return port
    raise StudyError.of(
        met=f"no port from {first} on is free",
        rule=f"the lab takes one of {_PORTS_TRIED} ports from --port on",
        remedy="close another lab, or name another --port between 1024 and 65535",
    )


def attend(command: Sequence[str], environment: Mapping[str, str]) -> int:
    """Run a server for as long as this process lives, and never leave it behind.

    The server gets a session of its own, so that Ctrl+C reaches it through here only: asked to
    end it ends, instead of asking back. Whatever ends this process ends the server first.

    Returns
    -------
    int
        The server's exit code, or that of the signal which ended it.
    """
    names = ("SIGINT", "SIGTERM", "SIGHUP", "SIGBREAK")
    heeded = [getattr(signal, name) for name in names if hasattr(signal, name)]

    def stop(number: int, _frame: Any) -> None:
        raise SystemExit(EXIT_STOPPED if number == signal.SIGINT else 128 + number)

    before = {number: signal.signal(number, stop) for number in heeded}
    server = None
    try:
        server = subprocess.Popen(
            command, env=dict(environment), stdin=subprocess.DEVNULL, start_new_session=True
        )
        return server.wait()
    except SystemExit as end:
        return int(end.code or 0)
    finally:
        # A second signal must not keep the server from being ended.
        for number in heeded:
            signal.signal(number, signal.SIG_IGN)
        if server is not None and server.poll() is None:
            server.terminate()
            try:
                server.wait(_PATIENCE_S)
            except subprocess.TimeoutExpired:
                server.kill()
                server.wait()
        for number, handler in before.items():
            signal.signal(number, handler)


def _parameters(settings: Sequence[str]) -> dict[str, dict[str, Any]]:
    """Turn ``WORKBOOK.NAME=VALUE`` into values by workbook and name."""
    values: dict[str, dict[str, Any]] = {}
    for setting in settings:
        name, equals, text = setting.partition("=")
        workbook, dot, parameter = name.strip().partition(".")
        if not (equals and dot and parameter):
            raise StudyError.of(
                met=f"--set {setting}",
                rule="a parameter is set as WORKBOOK.NAME=VALUE",
                remedy="write for instance --set 4_energy_yield.hub_height_m=120",
            )
        try:
            value = ast.literal_eval(text)
        except (SyntaxError, ValueError):
            value = text  # a plain word is a text
        values.setdefault(workbook, {})[parameter] = value
    return values


def _own_name() -> str:
    """The command as it was called: by its path where its name alone does not find it."""
    called = Path(sys.argv[0])
    if called.stem != "sitestudy" or shutil.which("sitestudy") == str(called):
        return "sitestudy"
    return _shown(called)


def _shown(path: Path) -> str:
    """A path as seen from here, if it lies below; else in full."""
    here = Path.cwd()
    return str(path.relative_to(here)) if path.is_relative_to(here) else str(path)


class _Progress:
    """One bar per workbook on stderr; one line per workbook where that is no terminal."""

    def __init__(self) -> None:
        self._workbook = ""
        self._bar: Any = None

    def __call__(self, workbook: str, done: int, total: int) -> None:
        started = workbook != self._workbook
        self._workbook = workbook
        if not sys.stderr.isatty():
            if started:
                print(f"running {workbook}, {total} cells", file=sys.stderr, flush=True)
            return
        from tqdm import tqdm

        if started:
            self.close()
            self._bar = tqdm(
                total=total,
                desc=f"{workbook:<28}",
                unit="cell",
                bar_format="{desc} {bar:24} {n_fmt}/{total_fmt} cells {elapsed}",
            )
        self._bar.update(done - self._bar.n)

    def close(self) -> None:
        if self._bar is not None:
            self._bar.close()


if __name__ == "__main__":
    sys.exit(main())
