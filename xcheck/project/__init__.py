"""The project file beside the decks."""

from xcheck.project.file import Project, find_project, read_project

__all__ = ["Project", "find_project", "read_project"]
