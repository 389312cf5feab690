"""Counting beside the screen: one request at a time, and a newer request makes a waiting or running one pointless."""

from __future__ import annotations

import threading
from collections.abc import Callable
from concurrent.futures import Future
from dataclasses import dataclass

import numpy as np

from encircle.engine.result import LoopCurve, LoopResult
from encircle.tui.marked_curve import with_points
from encircle.tui.marks import marked_frequencies
from encircle.tui.picture import LoopProject, Picture

Superseded = Callable[[], bool]


class SupersededError(Exception):
    """The work was given up because a newer request waits."""


def picture_of(filed: LoopProject, now: LoopProject, chosen: int, superseded: Superseded) -> Picture:
    """Count the file and the trial, and take the curve of the chosen loop."""
    results = []
    for project in (filed, now):
        if superseded():
            raise SupersededError
        results.append(project.check())
    name = now.loop_names[chosen]
    inside = now.loop_names[: chosen + 1]
    differs = any(now.gains[inner] != filed.gains[inner] for inner in inside)
    return Picture(
        filed=results[0],
        now=results[1],
        chosen=chosen,
        curve=_marked_curve(now, results[1].loops[chosen]),
        curve_before=filed.curve(name) if differs else None,
    )


def _marked_curve(project: LoopProject, loop: LoopResult) -> LoopCurve:
    """The curve with all frequencies worth a look among its points."""
    curve = project.curve(loop.name)
    marks = np.array(marked_frequencies(loop))
    return with_points(curve, marks, project.response(loop.name, marks)) if len(marks) else curve


@dataclass(frozen=True, slots=True)
class _Request:
    work: Callable[[Superseded], Picture]
    answer: Future[Picture]


class Recounter:
    """One thread that counts. It is a daemon: leaving the program never waits for a count."""

    def __init__(self) -> None:
        self._waiting: _Request | None = None
        self._closed = False
        self._changed = threading.Condition()
        self._thread: threading.Thread | None = None

    def request(self, work: Callable[[Superseded], Picture]) -> Future[Picture]:
        """Start ``work``, or let it wait in the place of an older request, whose answer is then cancelled."""
        request = _Request(work, Future())
        with self._changed:
            if self._waiting is not None:
                self._waiting.answer.cancel()
            self._waiting = request
            if self._thread is None:
                self._thread = threading.Thread(target=self._serve, name="recount", daemon=True)
                self._thread.start()
            self._changed.notify()
        return request.answer

    def close(self) -> None:
        """Take no more requests; a running count is left to itself."""
        with self._changed:
            self._closed = True
            self._changed.notify()

    def _superseded(self) -> bool:
        return self._closed or self._waiting is not None

    def _serve(self) -> None:
        while True:
            with self._changed:
                while self._waiting is None and not self._closed:
                    self._changed.wait()
                if self._closed or self._waiting is None:
                    return
                request, self._waiting = self._waiting, None
            if request.answer.set_running_or_notify_cancel():
                self._answer(request)

    def _answer(self, request: _Request) -> None:
        """Whatever goes wrong travels to whoever asked."""
        try:
            request.answer.set_result(request.work(self._superseded))
        except BaseException as error:
            request.answer.set_exception(error)
