"""Trial gains kept under the user's state folder, so that a dropped line or a killed program loses nothing.

One small file for each project, named by the project's path and content: a trial belongs to the file it was tried on.
"""

from __future__ import annotations

import hashlib
import json
import math
import os
from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

from encircle.tui.trial import MOST_TENTHS, Trial, TrialGain

FORMAT = 1
LARGEST_FILE = 1_000_000


class TrialFileError(ValueError):
    """A kept trial cannot be read; the message says which file and why."""


def state_folder(environment: Mapping[str, str] = os.environ) -> Path:
    """``XDG_STATE_HOME`` (absolute, as the XDG Base Directory Specification asks), else ``~/.local/state``."""
    given = Path(environment.get("XDG_STATE_HOME", ""))
    return (given if given.is_absolute() else Path.home() / ".local" / "state") / "encircle"


class TrialStore:
    """The kept trial of one project."""

    def __init__(self, project_file: str, sha256: str, folder: Path | None = None) -> None:
        self._project = str(Path(project_file).resolve())
        self._sha256 = sha256
        name = hashlib.sha256(f"{self._project}\n{sha256}".encode("utf-8", "surrogateescape")).hexdigest()
        self.path = (folder or state_folder()) / "trials" / f"{name[:32]}.json"

    def keep(self, trial: Trial) -> None:
        """Write the trial, whole or not at all; an empty trial removes the file. ``OSError`` where that fails."""
        if not trial.gains:
            self.path.unlink(missing_ok=True)
            return
        self.path.parent.mkdir(parents=True, exist_ok=True)
        unfinished = self.path.with_suffix(f".{os.getpid()}.tmp")
        try:
            unfinished.write_text(json.dumps(self._content(trial)), encoding="utf-8")
            unfinished.replace(self.path)
        finally:
            unfinished.unlink(missing_ok=True)

    def kept(self, loop_names: tuple[str, ...]) -> Trial:
        """The kept trial, empty where there is none; ``TrialFileError`` where the file cannot be understood."""
        try:
            if self.path.stat().st_size > LARGEST_FILE:
                raise TrialFileError(f"{self.path}: too large to be a trial")
            content = json.loads(self.path.read_text(encoding="utf-8"))
            return _trial(content, loop_names)
        except FileNotFoundError:
            return Trial()
        except (OSError, ValueError, KeyError, TypeError, AttributeError, RecursionError, OverflowError) as error:
            raise TrialFileError(f"{self.path}: not a trial that this program can read") from error

    def _content(self, trial: Trial) -> dict[str, Any]:
        gains = {name: {"start": gain.start, "tenths": gain.tenths} for name, gain in trial.gains.items()}
        project = self._project.encode("utf-8", "backslashreplace").decode()
        return {"format": FORMAT, "project": project, "sha256": self._sha256, "gains": gains}


def _trial(content: dict[str, Any], loop_names: tuple[str, ...]) -> Trial:
    if content["format"] != FORMAT:
        raise ValueError(f"format {content['format']!r}")
    gains = {name: _gain(entry) for name, entry in content["gains"].items() if name in loop_names}
    return Trial(MappingProxyType(gains))


def _gain(entry: dict[str, Any]) -> TrialGain:
    gain = TrialGain(float(entry["start"]), int(entry["tenths"]))
    if abs(gain.tenths) > MOST_TENTHS or not 0 < gain.gain < math.inf:
        raise ValueError("a gain out of range")
    return gain
