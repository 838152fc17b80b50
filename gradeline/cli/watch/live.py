"""The page that follows a survey: the last good report, and above it what is wrong with the survey now."""

from __future__ import annotations

import html
import re
import secrets
from collections.abc import Sequence
from dataclasses import dataclass
from threading import Condition

__all__ = ["Live", "Shown", "page_of"]

# The report forbids itself every script; the served page brings the rule with it that allows the one below.
_RULE = re.compile(r'<meta http-equiv="Content-Security-Policy"[^>]*>\s*')
_BODY = "<body>\n"

_SCRIPT = """
(() => {
  const script = document.currentScript, at = script.dataset.version;
  const status = document.getElementById("watch-status"), said = status.textContent;
  const pause = (time) => new Promise((done) => setTimeout(done, time));
  (async () => {
    for (;;) {
      try {
        const answer = await fetch("/version?after=" + at, { cache: "no-store" });
        if (!answer.ok) throw new Error(answer.status);
        if ((await answer.text()) !== at) { location.reload(); return; }
        status.textContent = said;
      } catch {
        status.textContent = "gradeline watch has ended or cannot be reached: this page no longer follows the survey.";
        await pause(1000);
      }
    }
  })();
})();
"""

_EMPTY = """<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>No report yet</title>
<style>
body { margin: 0; color: #1f2933; background: #fff; font: 16px/1.5 system-ui, "Noto Sans", "DejaVu Sans", Arial, sans-serif; }
main { padding: 1.2rem; }
</style>
</head>
<body>
<main><p>There is no report yet: it appears here as soon as the survey can be reduced.</p></main>
</body>
</html>
"""


@dataclass(frozen=True)
class Shown:
    """What is to be seen at one moment.

    Parameters
    ----------
    version : str
        Another one whenever anything changes.
    report : str or None
        HTML of the last good report; None before there is one.
    reduced : str
        When it was reduced, as text.
    problems : tuple of str
        What is wrong with the survey now, plain text; nothing where it is in order.
    since : str
        Since when, as text.
    """

    version: str
    report: str | None = None
    reduced: str = ""
    problems: tuple[str, ...] = ()
    since: str = ""


class Live:
    """What is shown now, and who waits for the next; safe between threads."""

    def __init__(self, source: str) -> None:
        self.source = source
        self._start, self._count = secrets.token_hex(4), 0
        self._shown = Shown(f"{self._start}-0")
        self._changed = Condition()
        self._closed = False

    @property
    def shown(self) -> Shown:
        """What is shown now."""
        with self._changed:
            return self._shown

    def good(self, report: str, when: str) -> str:
        """Show a report; return its version."""
        return self._show(report, when, (), "")

    def bad(self, problems: Sequence[str], when: str) -> str:
        """Keep the last good report and say above it what is wrong; return the version.

        The same problems once more are nothing new.
        """
        now = self.shown
        if now.problems == tuple(problems):
            return now.version
        return self._show(now.report, now.reduced, tuple(problems), when)

    def _show(self, report: str | None, reduced: str, problems: tuple[str, ...], since: str) -> str:
        with self._changed:
            self._count += 1
            self._shown = Shown(f"{self._start}-{self._count}", report, reduced, problems, since)
            self._changed.notify_all()
            return self._shown.version

    def after(self, version: str, timeout: float) -> str:
        """Wait until another version than `version` is shown, at most `timeout` (s); return what is shown then."""
        with self._changed:
            self._changed.wait_for(lambda: self._closed or self._shown.version != version, timeout)
            return self._shown.version

    def close(self) -> None:
        """Let go of everybody who waits."""
        with self._changed:
            self._closed = True
            self._changed.notify_all()


def page_of(shown: Shown, source: str, nonce: str) -> tuple[str, str]:
    """Return the page to serve and its content security policy.

    Parameters
    ----------
    shown : Shown
        What is to be seen.
    source : str
        The survey's place, named at the top.
    nonce : str
        Of this answer: only the script that carries it runs.

    Returns
    -------
    page, policy : str
        HTML in which everything that came from files is escaped; the value of the header.
    """
    page = _RULE.sub("", _EMPTY if shown.report is None else shown.report, count=1)
    head, body, rest = page.partition(_BODY)
    policy = (
        f"default-src 'none'; style-src 'unsafe-inline'; img-src data:; script-src 'nonce-{nonce}'; connect-src 'self'; "
        "frame-ancestors 'none'; base-uri 'none'; form-action 'none'"
    )
    when = f"; this report is of {shown.reduced}" if shown.reduced else ""
    follows = f"Follows {source}{when}."
    top = (
        '<div style="padding:.35rem 1.2rem;border-bottom:1px solid #d5dadd;font-size:.85rem;color:#55606a;'
        f'overflow-wrap:anywhere"><span id="watch-status">{html.escape(follows)}</span></div>\n'
        f"{_note(shown)}"
    )
    script = f'<script nonce="{nonce}" data-version="{html.escape(shown.version)}">{_SCRIPT}</script>\n'
    return head + body + top + script + rest, policy


def _note(shown: Shown) -> str:
    if not shown.problems:
        return ""
    rows = "\n".join(f"<li>{html.escape(text)}</li>" for text in shown.problems)
    below = (
        ""
        if shown.report is None
        else f" The report below is the last good one, of {html.escape(shown.reduced)}."
    )
    return (
        '<aside id="watch-note" role="alert" style="padding:.6rem 1.2rem;background:#fdf3ec;border-left:5px solid '
        '#b34700;overflow-wrap:anywhere">\n'
        f"<strong>Since {html.escape(shown.since)} the survey cannot be reduced.</strong>{below}\n"
        f'<ul style="margin:.3rem 0;padding-left:1.2rem">\n{rows}\n</ul>\n</aside>\n'
    )
