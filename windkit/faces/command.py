"""The command `sitestudy`: make a study, run it, open it.

Each verb calls one function of the study floor and says what came of it. Faults a person can put
right go to stderr as one message with exit code 2; nothing here computes.
"""

from __future__ import annotations

import argparse
import ast
import os
import secrets
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import windkit
from windkit.study.errors import StudyError

__all__ = ["main"]

EXIT_BAD_INPUT = 2
EXIT_STOPPED = 130


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

    folder = make_study(chosen.folder, demo=chosen.demo)
    print(f"made {chosen.folder}/")
    if chosen.demo:
        print(f"next: sitestudy run {chosen.folder}")
    else:
        print(f"next: put the client's files into {folder.name}/data/, fill in study.toml, then")
        print(f"      sitestudy run {chosen.folder}")
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
    # The token goes by the environment, so that it shows in no process list.
    token = secrets.token_urlsafe(24)
    command = [
        sys.executable, "-m", "jupyterlab", "--ip=127.0.0.1", f"--port={chosen.port}",
        f"--ServerApp.root_dir={study.folder}",
    ]  # fmt: skip
    if chosen.no_browser:
        command.append("--no-browser")
    if hasattr(os, "geteuid") and os.geteuid() == 0:
        command.append("--allow-root")
    print(f"token for this session: {token}", flush=True)
    return subprocess.call(command, env={**os.environ, "JUPYTER_TOKEN": token})


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


def _shown(path: Path) -> str:
    """A path as seen from here, if it lies below; else in full."""
    here = Path.cwd()
    return str(path.relative_to(here)) if path.is_relative_to(here) else str(path)


class _Progress:
    """One bar per workbook on stderr."""

    def __init__(self) -> None:
        self._workbook = ""
        self._bar: Any = None

    def __call__(self, workbook: str, done: int, total: int) -> None:
        from tqdm import tqdm

        if workbook != self._workbook:
            self.close()
            self._workbook = workbook
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
