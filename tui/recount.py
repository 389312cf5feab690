"""Counting beside the screen: one request at a time, and a newer request makes a waiting or running one pointless."""

from __future__ import annotations

import threading
from collections.abc import Callable
from concurrent.futures import Future
from dataclasses import dataclass

from encircle.tui.picture import LoopProject, Picture

Superseded = Callable[[], bool]


class SupersededError(Exception):
    """The work was given up because a newer request waits."""


def picture_of(filed: LoopProject, now: LoopProject, chosen: int, superseded: Superseded) -> Picture:
    """Count every loop of the file and of the trial, from the inside to the outside, and take the chosen curve."""
    for project in (filed, now):
        for name in project.loop_names:
            if superseded():
                raise SupersededError
            project.loop(name)
    name = now.loop_names[chosen]
    inside = now.loop_names[: chosen + 1]
    differs = any(now.gains[inner] != filed.gains[inner] for inner in inside)
    return Picture(
        filed=filed.check(),
        now=now.check(),
        chosen=chosen,
        curve=now.curve(name),
        curve_before=filed.curve(name) if differs else None,
    )


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
