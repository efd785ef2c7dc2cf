"""The status of a run in words, and as JSON for scripts."""

from __future__ import annotations

import json
import time
from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

from dda.report.progress import duration_text
from dda.report.status import KINDS, Status, set_text


def status_text(status: Status) -> str:
    """Return the lines that `dda status` prints."""
    lines = [f"{status.study}  ({status.folder})", headline(status), ""]
    width = max(len(str(count)) for count in status.counts.values())
    lines += [
        f"  {kind:14}{count:>{width}}   {KINDS[kind]}"
        for kind, count in status.counts.items()
        if count or kind in ("converged", "failed", "waiting")
    ]
    if text := previews_text(status):
        lines.append(f"  {text}")
    lines += ["", holder_text(status.holder)]
    lines += [
        f"  {place(task.varied, task.wavelength_nm)}  for {duration_text(task.seconds)}"
        for task in status.tasks
    ]
    if more := status.counts["running"] - len(status.tasks):
        lines.append(f"  and {more} more")
    if status.doubts:
        lines += ["", "look at these points (the number is that of the row, from 0):"]
        lines += [
            f"  {doubt.number}: {place(doubt.varied, doubt.wavelength_nm)}  {doubt.kind}: "
            f"{doubt.reason or 'no reason was given'}"
            for doubt in status.doubts
        ]
        if more := status.doubtful - len(status.doubts):
            lines.append(f"  and {more} more")
    return "\n".join([*lines, "", f"{next_text(status)}: {status.next}"])


def status_json(status: Status) -> str:
    """Return the same as a JSON object."""
    return json.dumps(asdict(status), default=str, indent=2)


def headline(status: Status) -> str:
    """Return how much is done and how much time is left, in a line."""
    text = f"{status.done} of {status.total} points done"
    if status.done == status.total:
        return text if status.holder is None else f"{text}; tables and near fields may be left"
    if status.seconds_left is None:
        return f"{text}; no pace is known yet"
    left = duration_text(status.seconds_left)
    return f"{text}; about {left} left" + ("" if status.holder is not None else " once it goes on")


def previews_text(status: Status) -> str:
    """Return how many coarse answers there are in advance; empty once they do not matter."""
    asked, there = status.previews
    if not asked or status.done == status.total:
        return ""
    return f"coarse answers in advance: {there} of {asked}"


def holder_text(holder: Mapping[str, Any] | None) -> str:
    """Return who runs it, in a line."""
    if holder is None:
        return "nobody is running it"
    if not holder:
        return "a process is running it"
    since = time.strftime("%Y-%m-%d %H:%M", time.localtime(float(holder["since"])))
    return f"process {holder['process']} on {holder['machine']} is running it since {since}"


def next_text(status: Status) -> str:
    """Return what the command `Status.next` is for."""
    if status.holder is not None:
        return "to watch it"
    if status.done < status.total:
        return "to go on"
    again = status.counts["failed"] + status.counts["not converged"]
    return "to compute those points again" if again else "to have its table"


def place(varied: Mapping[str, Any], wavelength: float) -> str:
    """Return which point it is.

    >>> place({"particle.edge": 40}, 520.0)
    'particle.edge = 40, 520 nm'
    """
    return ", ".join(filter(None, (set_text(varied), f"{wavelength:.10g} nm")))
