"""Panels an analyst works in: walking through suspected spans and deciding on each.

Here are controls and what they show. Which spans there are, what stands around them and what goes
into the ledger file is in `windkit.study.review`. A panel works without a page: setting a value
and clicking a button in code does what a person's hand does. At the end of a headless run it
stands in its first state, which the report shows as it is.
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from datetime import date
from html import escape
from pathlib import Path
from typing import Any

import ipywidgets as widgets  # type: ignore[import-untyped]
import numpy as np
import pandas as pd

from windkit.faces.figures_review import span_picture
from windkit.faces.look import (
    ACCENT,
    BAD,
    INK,
    MAIN,
    number_text,
)
from windkit.faces.tables import Table
from windkit.study.errors import StudyError
from windkit.study.ledger import ALL, AUTOMATIC, empty_ledger, read_ledger
from windkit.study.record import Record
from windkit.study.review import (
    AVERAGED,
    COVERED,
    DECIDED,
    MASKED,
    WAITING,
    add_to_ledger,
    decision_rows,
    spans_to_review,
    take_from_ledger,
    with_decisions,
)

__all__ = ["ReviewPanel"]

_EVERY_CHECK = ""
_OTHERS = {
    MASKED: "masked by their check",
    AVERAGED: "of the mast's shadow dealt with by averaging the pair",
    COVERED: "inside masked ones",
    DECIDED: "decided with a wider span",
}
_SAID = {"accepted": "left out", "rejected": "kept"}


class ReviewPanel:
    """Suspected spans of a checked record, one after the other, each to be decided.

    Each decision is written to the ledger file at once; it takes effect when the record is built
    again. Name and reason are asked for; what is missing is said in the panel.

    Parameters
    ----------
    record : Record
        The checked record.
    ledger_file : Path
        ``ledger.csv`` of the study.
    who : str
        Name of the person who decides; it can be written in the panel too.
    today : callable, optional
        Gives the date of a decision; the clock's if left out.
    averaged : bool
        See `windkit.study.review.spans_to_review`.

    Attributes
    ----------
    widget : VBox
        The whole panel.
    who, reason : Text
        Name and reason.
    check : Dropdown
        Check whose spans are walked through, or all.
    accept, reject, accept_check, back, onward, undo : Button
        Leave the values out, keep them, leave out all that is open of this check, one span back,
        one span on, and take the last decision back.
    counter, facts, message : HTML
        What is left, the span shown, and what the panel says.
    picture : Image
        The span with two days on both sides.

    Raises
    ------
    StudyError
        If the ledger file cannot be read.

    Examples
    --------
    >>> panel = ReviewPanel(record, study.ledger, who="E. Marsh")
    >>> panel.reason.value = "frost on the cup, camera of that night"
    >>> panel.accept.click()
    """

    def __init__(
        self,
        record: Record,
        ledger_file: Path,
        *,
        who: str = "",
        today: Callable[[], date] | None = None,
        averaged: bool = False,
    ) -> None:
        self._record = record
        self._file = Path(ledger_file)
        self._today = today or date.today
        self._spans = with_decisions(
            spans_to_review(record, averaged=averaged), read_ledger(self._file)
        )
        self._written: list[tuple[int, pd.DataFrame]] = []
        self._at = 0
        # The lab sends events of one panel to several threads of the kernel; they take turns.
        self._turn = threading.RLock()

        self.counter = widgets.HTML()
        self.facts = widgets.HTML()
        self.message = widgets.HTML()
        self.picture = widgets.Image(format="png", layout=widgets.Layout(max_width="100%"))
        self.check = widgets.Dropdown(
            options=self._check_options(), value=_EVERY_CHECK, description="Check"
        )
        self.who = widgets.Text(value=who, description="Name", placeholder="who decides")
        self.reason = widgets.Text(
            description="Reason",
            placeholder="why, for the reviewer",
            layout=widgets.Layout(width="36em", max_width="100%"),
        )
        self.accept = _button("Accept: leave out", self._in_turn(self._on_accept), colour=MAIN)
        self.reject = _button("Reject: keep", self._in_turn(self._on_reject), colour=ACCENT)
        self.accept_check = _button(
            "Accept all", self._in_turn(self._on_accept_check), width="19em"
        )
        self.back = _button("‹ Back", self._in_turn(lambda _: self._step(-1)), width="6.5em")
        self.onward = _button("Next ›", self._in_turn(lambda _: self._step(1)), width="6.5em")
        self.undo = _button("Undo last", self._in_turn(self._on_undo), width="8em")
        self.check.observe(self._in_turn(self._on_check), names="value")
        self.widget = widgets.VBox([self.counter])
        if len(self._spans):
            self.widget.children = [
                self.counter,
                widgets.HBox([self.check, self.back, self.onward], layout=_wrapping()),
                self.facts,
                self.picture,
                widgets.HBox([self.who, self.reason], layout=_wrapping()),
                widgets.HBox(
                    [self.accept, self.reject, self.accept_check, self.undo], layout=_wrapping()
                ),
                self.message,
            ]
            self._at = self._first_open()
        self._show()

    @property
    def decided(self) -> pd.DataFrame:
        """Ledger rows written by this panel and not taken back, in their order."""
        rows = [rows for _, rows in self._written]
        return pd.concat(rows, ignore_index=True) if rows else empty_ledger()

    @property
    def span(self) -> pd.Series:
        """The span shown: a row of `windkit.study.review.spans_to_review`."""
        return self._spans.iloc[self._at]

    def __repr__(self) -> str:
        return f"ReviewPanel: {_waiting(self._spans)} of {len(self._spans)} spans left to decide"

    def _repr_mimebundle_(self, **options: Any) -> dict[str, Any]:
        return {**self.widget._repr_mimebundle_(**options), "text/plain": repr(self)}

    def _in_turn(self, handle: Callable[[Any], None]) -> Callable[[Any], None]:
        def handled(event: Any) -> None:
            with self._turn:
                handle(event)

        return handled

    def _check_options(self) -> list[tuple[str, str]]:
        sizes = self._spans.groupby("rule", sort=False).size()
        every = (f"all checks ({number_text(len(self._spans))})", _EVERY_CHECK)
        rules = [(f"{rule} ({number_text(size)})", str(rule)) for rule, size in sizes.items()]
        return [every, *rules]

    def _walked(self) -> list[int]:
        """Positions of the spans of the chosen check."""
        if self.check.value == _EVERY_CHECK:
            return list(range(len(self._spans)))
        return np.flatnonzero(self._spans["rule"] == self.check.value).tolist()

    def _first_open(self, after: int = -1) -> int:
        """The next span nobody has decided on: behind `after`, else from the start, else stay."""
        walked = self._walked()
        open_ones = [at for at in walked if self._spans["decision"].iloc[at] == ""]
        if not open_ones:
            return after if after in walked else walked[0]
        return next((at for at in open_ones if at > after), open_ones[0])

    def _on_check(self, _change: Any) -> None:
        self._at = self._first_open()
        self._show()

    def _step(self, by: int) -> None:
        walked = self._walked()
        self._at = walked[(walked.index(self._at) + by) % len(walked)]
        self._show()

    def _on_accept(self, _button: Any) -> None:
        self._decide([self._at], "accepted")

    def _on_reject(self, _button: Any) -> None:
        self._decide([self._at], "rejected")

    def _on_accept_check(self, _button: Any) -> None:
        self._decide(self._open_of_rule(), "accepted", bulk=True)

    def _open_of_rule(self) -> list[int]:
        alike = (self._spans["rule"] == self.span["rule"]) & (self._spans["decision"] == "")
        return np.flatnonzero(alike).tolist()

    def _decide(self, positions: list[int], decision: str, *, bulk: bool = False) -> None:
        who, reason = (" ".join(text.value.split()) for text in (self.who, self.reason))
        if missing := _missing(who, reason):
            self._say(missing, BAD)
            return
        spans = self._spans.iloc[positions]
        if spans.empty:
            self._say(f"Nothing is left to decide of {self.span['rule']}.", BAD)
            return
        try:
            rows = decision_rows(
                spans,
                decision=decision,
                reason=reason,
                who=who,
                when=self._today().isoformat(),
                bulk=bulk,
            )
            ledger = add_to_ledger(self._file, rows)
        except (StudyError, OSError) as error:
            self._say(f"Nothing was written: {error}", BAD)
            return
        self._written.append((self._at, rows))
        self._spans = with_decisions(self._spans, ledger)
        self.reason.value = ""  # one reason does not do for the next span
        was, self._at = self.span, self._first_open(self._at)
        what = (
            f"{number_text(len(rows))} spans of {was['rule']} are"
            if bulk
            else f"{was['channel']}, {was['from']:%Y-%m-%d %H:%M}, {was['rule']} is"
        )
        self._show()
        self._say(
            f"{what} to be {_SAID[decision]}: written to {self._file.name}. "
            "Run the workbook again to see what it changes.",
            MAIN,
        )

    def _on_undo(self, _button: Any) -> None:
        if not self._written:
            return
        at, rows = self._written[-1]
        try:
            ledger = take_from_ledger(self._file, rows)
        except (StudyError, OSError) as error:
            self._say(f"Nothing was undone: {error}", BAD)
            return
        self._written.pop()
        self._spans = with_decisions(self._spans, ledger)
        if at not in self._walked():
            self.check.value = _EVERY_CHECK
        self._at = at
        self._show()
        count = "decision was" if len(rows) == 1 else f"{number_text(len(rows))} decisions were"
        self._say(f"The last {count} taken out of {self._file.name} again.", MAIN)

    def _say(self, text: str, colour: str) -> None:
        self.message.value = f'<div style="color: {colour}">{escape(text)}</div>' if text else ""

    def _show(self) -> None:
        self.counter.value = _counter(self._spans)
        if self._spans.empty:
            return
        span, open_alike = self.span, len(self._open_of_rule())
        walked = self._walked()
        self.facts.value = _facts(span, walked.index(self._at) + 1, len(walked))
        self.picture.value = span_picture(self._record, span)
        how_many = f"all {number_text(open_alike)} left" if open_alike > 1 else "all"
        self.accept_check.description = f"Accept {how_many} of {span['rule']}"
        self.accept_check.disabled = open_alike < 2
        self.back.disabled = self.onward.disabled = len(walked) == 1
        self.undo.disabled = not self._written
        self._say("", MAIN)


def _counter(spans: pd.DataFrame) -> str:
    if spans.empty:
        return "<b>The checks found nothing to look at.</b>"
    if (spans["decision"] != "").all():
        return f"<b>All {number_text(len(spans))} spans are decided.</b>"
    open_ones = spans[spans["decision"] == ""]
    told = [
        f"{number_text(int((open_ones['state'] == state).sum()))} {what}"
        for state, what in _OTHERS.items()
        if (open_ones["state"] == state).any()
    ]
    decided = len(spans) - len(open_ones)
    told += [f"{number_text(decided)} decided"] if decided else []
    return (
        f"<b>{number_text(_waiting(spans))} of {number_text(len(spans))} spans left to decide</b>"
        + (f"; the others: {', '.join(told)}" if told else "")
    )


def _waiting(spans: pd.DataFrame) -> int:
    """Spans that wait for a decision; those that are masked or dealt with can be decided too."""
    return int(((spans["decision"] == "") & (spans["state"] == WAITING)).sum())


def _facts(span: pd.Series, place: int, count: int) -> str:
    row = {
        "Channel": "all" if span["channel"] == ALL else span["channel"],
        "From (UTC)": f"{span['from']:%Y-%m-%d %H:%M}",
        "To (UTC)": f"{span['to']:%Y-%m-%d %H:%M}",
        "Values": span["count"],
        "Believed now": span["believed"],
        "Measure": span["measure"],
        "Threshold": span["threshold"],
        "State": f"decided: {_SAID[span['decision']]}" if span["decision"] else span["state"],
    }
    said = f"{span['rule']}, {number_text(place)} of {number_text(count)}: {span['reason']}"
    formats = dict.fromkeys(("Measure", "Threshold"), _short)
    table = Table([row], caption=said, formats=formats).to_html(with_style=True)
    return f'<div style="color: {INK}; line-height: 1.4; overflow-x: auto">{table}</div>'


def _short(value: float) -> str:
    return f"{value:.5g}".replace("-", "−")


def _missing(who: str, reason: str) -> str:
    """What to say when name or reason will not do; empty text if they will."""
    if not who:
        return "Write your name first: a reviewer reads who decided."
    if who == AUTOMATIC:
        return f"'{AUTOMATIC}' stands for the checks; write the name of a person."
    if not reason:
        return "Write a reason first: a reviewer reads why."
    return ""


def _button(
    text: str, clicked: Callable[[Any], None], *, colour: str = "", width: str = "11em"
) -> Any:
    button = widgets.Button(description=text, layout=widgets.Layout(width=width))
    if colour:
        button.style.button_color = colour
        button.style.text_color = "white"
    button.on_click(clicked)
    return button


def _wrapping() -> Any:
    return widgets.Layout(flex_flow="row wrap", align_items="center")
