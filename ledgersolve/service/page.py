"""Status.html: one static page without a script, readable on a phone, that looks dead when the service is."""

import base64
import hashlib
import math
from html import escape
from typing import Any

_STYLE = """
:root { --ink: #17324d; --soft: #5a6b7b; --line: #d7dee5; --paper: #fbfaf7; --card: #ffffff;
  --good: #1d6b45; --fix: #9a4a00; --bad: #9b1c31; --run: #0b5c8a; }
@media (prefers-color-scheme: dark) {
  :root { --ink: #e8edf2; --soft: #a3b1bf; --line: #34424f; --paper: #131b23; --card: #1b2630;
    --good: #7fd1a5; --fix: #f0b072; --bad: #f08c9c; --run: #86c5ec; } }
* { box-sizing: border-box; }
body { margin: 0 auto; max-width: 76rem; padding: 1rem; background: var(--paper); color: var(--ink);
  font: 1rem/1.45 system-ui, sans-serif; }
h1 { font-size: 1.35rem; margin: 0 0 .25rem; }
h2 { font-size: 1.05rem; margin: 1.75rem 0 .5rem; }
.count { color: var(--soft); font-weight: normal; }
.pulse { background: var(--card); border: 1px solid var(--line); border-left: .4rem solid var(--good);
  border-radius: .4rem; padding: .75rem 1rem; }
.pulse.held { border-left-color: var(--fix); }
.pulse p { margin: .2rem 0; }
.pulse b { white-space: nowrap; }
@media (min-width: 58rem) { .sides { display: grid; grid-template-columns: 1fr 1fr; gap: 0 2.5rem; } }
.soft { color: var(--soft); font-size: .9rem; }
ul { list-style: none; margin: 0; padding: 0; border-top: 1px solid var(--line); }
li { border-bottom: 1px solid var(--line); padding: .55rem 0; }
.name { font-weight: 600; overflow-wrap: anywhere; unicode-bidi: isolate; }
.what { overflow-wrap: anywhere; }
.mark { display: inline-block; min-width: 4.6rem; font-weight: 600; }
.solved { color: var(--good); } .fix { color: var(--fix); } .failed { color: var(--bad); }
.runs { color: var(--run); }
"""
_REFRESH_SECONDS = 10
_MOST_WAITING = 25


def render(state: dict[str, Any]) -> str:
    """The whole page; every text from outside is escaped, nothing is loaded, nothing can run."""
    digest = base64.b64encode(hashlib.sha256(_STYLE.encode("utf-8")).digest()).decode("ascii")
    policy = f"default-src 'none'; style-src 'sha256-{digest}'; base-uri 'none'; form-action 'none'"
    fixes = [one for one in state["returned"] if one.get("outcome") != "solved"]
    waits = [_plain(one) for one in state["waiting"][:_MOST_WAITING]]
    more = int(state["waiting_count"]) - len(waits)
    if more > 0:
        waits.append(f'<span class="soft">and {more:,} more</span>')
    alerts = [_plain(one) for one in state["alerts"]]
    parts = [
        _pulse(state),
        _section("Needs the administrator", alerts) if alerts else "",
        '<div class="sides"><div>',
        _section("Running now", [_running(one) for one in state["running"]]),
        _section("Waiting", waits, int(state["waiting_count"])),
        "</div><div>",
        _section("Needs fixing", [_fix(one) for one in fixes]) if fixes else "",
        _section("Came back", [_returned(one) for one in state["returned"]]),
        "</div></div>",
    ]
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">'
        f'<meta http-equiv="refresh" content="{_REFRESH_SECONDS}">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        '<meta name="referrer" content="no-referrer">'
        f"<title>{_text(_headline(state))}</title><style>{_STYLE}</style></head><body>"
        + "\n".join(filter(None, parts))
        + "</body></html>\n"
    )


def _headline(state: dict[str, Any]) -> str:
    running, waiting = len(state["running"]), int(state["waiting_count"])
    return f"LedgerSolve: {running} running, {waiting} waiting"


def _pulse(state: dict[str, Any]) -> str:
    """Whether the service lives: the reader compares a printed time with the clock on the wall."""
    at_work = state["state"] == "at work"
    minutes = max(1, round(float(state["stale_after_seconds"]) / 60.0))
    unit = "minute" if minutes == 1 else "minutes"
    why = f"<p>{_text(state['why'])}</p>" if state["why"] else ""
    return (
        f"<h1>{_text(_headline(state))}</h1>"
        f'<div class="pulse{"" if at_work else " held"}">'
        f"<p><b>{_text(str(state['state']).capitalize())}</b></p>{why}"
        f"<p>Last complete look at Inbox: <b>{_text(_time(state['last_scan']))}</b></p>"
        f'<p class="soft">If that is more than {minutes} {unit} ago, the service is not running: tell the '
        "administrator. Nothing that was dropped is lost. This page loads itself anew every "
        f"{_REFRESH_SECONDS} seconds.</p></div>"
    )


def _section(title: str, entries: list[str], count: int | None = None) -> str:
    number = len(entries) if count is None else count
    body = "".join(f"<li>{entry}</li>" for entry in entries) or '<li class="soft">nothing</li>'
    return f'<h2>{_text(title)} <span class="count">{number:,}</span></h2><ul>{body}</ul>'


def _plain(one: dict[str, Any]) -> str:
    return f'<div class="name">{_text(one.get("name"))}</div><div class="what">{_text(one.get("why"))}</div>'


def _running(one: dict[str, Any]) -> str:
    words = [f'<span class="runs">{_text(one.get("stage") or "reading")}</span>']
    if one.get("best") is not None:
        words.append(f"best cost so far {float(one['best']):,.2f}")
    if one.get("saving") is not None:
        words.append(f"at most {_up(float(one['saving']), 2):,.2f} could be saved")
    if one.get("left") is not None:
        words.append(f"at most {_duration(float(one['left']))} left")
    elapsed = _duration(float(one.get("elapsed") or 0.0))
    return (
        f'<div class="name">{_text(one.get("name"))}</div><div class="what">{", ".join(words)}</div>'
        f'<div class="soft">for {elapsed} on {_text(one.get("host"))}</div>'
    )


def _returned(one: dict[str, Any]) -> str:
    outcome = str(one.get("outcome"))
    style = {"solved": "solved", "to fix": "fix"}.get(outcome, "failed")
    words = [str(one["verdict"])] if one.get("verdict") else []
    if one.get("total_cost") is not None:
        words.append(f"total cost {float(one['total_cost']):,.2f}")
    if one.get("gap_pct"):
        words.append(f"at most {_up(float(one['gap_pct']), 3):.3f} % above the best possible")
    if one.get("faults"):
        words.append(f"{int(one['faults']):,} to fix")
    return (
        f'<div class="name">{_text(one.get("returned"))}</div><div class="what">'
        f'<span class="mark {style}">{_text(outcome)}</span> {_text(", ".join(words))}</div>'
        f'<div class="soft">{_text(_time(one.get("at")))}</div>'
    )


def _fix(one: dict[str, Any]) -> str:
    first = one.get("first_fault") or {}
    where = " ".join(filter(None, (str(first.get("sheet") or ""), str(first.get("cell") or ""))))
    what = f"{where}: {first.get('found')}. {first.get('remedy')}" if first else str(one.get("reason") or "")
    return f'<div class="name">{_text(one.get("name"))}</div><div class="what">{_text(what)}</div>'


def _up(figure: float, digits: int) -> float:
    """Rounded, never in our favour."""
    scale = 10.0**digits
    return math.ceil(figure * scale) / scale


def _duration(seconds: float) -> str:
    if seconds < 90:
        return f"{seconds:.0f} s"
    return f"{seconds / 60.0:.0f} min" if seconds < 5400 else f"{seconds / 3600.0:.1f} h"


def _time(value: Any) -> str:
    """A time of ISO 8601 as people read it, with its distance from UTC."""
    text = str(value)
    if not value or len(text) < 20:
        return "not yet" if not value else text
    return f"{text[:10]} {text[11:19]} (UTC{text[19:]})"


def _text(value: Any) -> str:
    return escape("" if value is None else str(value))
