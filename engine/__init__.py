"""Count, with proof, the encirclements of -1 for nested feedback loops.

``open_project(path)`` reads a project file; a ``Project`` answers for each loop with frozen results and numpy arrays.
"""

from encircle.engine.errors import Problem, ProjectError
from encircle.engine.project import Project, open_project
from encircle.engine.result import LoopCurve, LoopResult, Margins, Result
from encircle.engine.version import VERSION

__all__ = [
    "VERSION",
    "LoopCurve",
    "LoopResult",
    "Margins",
    "Problem",
    "Project",
    "ProjectError",
    "Result",
    "open_project",
]
