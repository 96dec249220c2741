"""Properties of reading at length: `make fuzz`.

The tests try some hundred files, drafts and edits of study.toml; here the same properties meet as
many as asked. A failure shows the smallest case that breaks a property, to be laid down as a test.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis import strategies as st

TESTS = Path(__file__).parents[1]
sys.path[:0] = [str(TESTS / "study"), str(TESTS.parent)]

from test_drafting import LINES, a_draft_is_toml_or_refused  # noqa: E402
from test_reading_bad_input import ANY_ROWS, bytes_are_read_or_refused, rows_add_up  # noqa: E402
from test_settings import EDITS, settings_are_read_or_refused  # noqa: E402

#: Each property by what it says, with its arguments beside the folder.
PROPERTIES: dict[str, tuple[Callable[..., None], dict[str, st.SearchStrategy[Any]]]] = {
    "rows in are rows kept and rows set aside": (rows_add_up, ANY_ROWS),
    "any bytes are read or refused": (
        bytes_are_read_or_refused,
        {"content": st.binary(max_size=300)},
    ),
    "any edit of study.toml is read or refused": (settings_are_read_or_refused, {"edits": EDITS}),
    "any file gives a draft in TOML or is refused": (
        a_draft_is_toml_or_refused,
        {"lines": LINES, "sign": st.sampled_from(",;\t|")},
    ),
}


def fuzz(name: str, examples: int, number: int | None) -> None:
    """Try one property on that many examples and say how long it took."""
    prop, strategies = PROPERTIES[name]
    start = time.perf_counter()
    with tempfile.TemporaryDirectory() as folder:

        def held(**arguments: Any) -> None:
            prop(Path(folder), **arguments)

        run = settings(
            max_examples=examples,
            deadline=None,
            database=None,
            suppress_health_check=list(HealthCheck),
            phases=(Phase.generate, Phase.shrink),
        )(given(**strategies)(held))
        (run if number is None else seed(number)(run))()
    print(f"{name}: {examples} examples, {time.perf_counter() - start:.0f} s", flush=True)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--examples", type=int, default=2000, help="of each property")
    parser.add_argument("--seed", type=int, help="the same examples again; anew if left out")
    options = parser.parse_args()
    for name in PROPERTIES:
        fuzz(name, options.examples, options.seed)


if __name__ == "__main__":
    main()
