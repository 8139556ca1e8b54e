"""Which files a deck may read: its own folder, its repository, and folders that the caller allows."""

from collections.abc import Sequence
from difflib import get_close_matches
from pathlib import Path


class AllowedFolders:
    """Links are resolved before a path is judged."""

    def __init__(self, deck: Path, include_dirs: Sequence[Path]) -> None:
        home = deck.resolve().parent
        repository = next((p for p in (home, *home.parents) if (p / ".git").exists()), home)
        self._shown_home = deck.parent
        self._home = home
        self._extra = [(d, d.resolve()) for d in include_dirs]
        self._allowed = (home, repository, *(d for _, d in self._extra))

    def allows(self, path: Path) -> bool:
        """Whether a resolved path lies in an allowed folder."""
        return any(path.is_relative_to(folder) for folder in self._allowed)

    def find(self, wanted: str, beside: Path) -> tuple[Path | None, str]:
        """The resolved path of an include, looked for beside the including file, beside the deck, and in the
        allowed folders; and how to show it to the user."""
        for folder, shown in self._places(beside):
            path = folder / wanted
            try:
                resolved = path.resolve()
                there = resolved.exists()
            except (OSError, RuntimeError, ValueError):
                continue
            # outside the allowed folders nothing is told apart, not even whether the file is there
            if there or not self.allows(resolved):
                return resolved, str(shown / wanted)
        return None, wanted

    def near(self, wanted: str, beside: Path) -> list[str]:
        """Names like the wanted one, among the files beside it."""
        folder = (beside / wanted).parent
        if not self.allows(folder.resolve()) or not folder.is_dir():
            return []
        names = [p.name for p in sorted(folder.iterdir())[:2000]]
        return get_close_matches(Path(wanted).name, names, n=3)

    def _places(self, beside: Path) -> list[tuple[Path, Path]]:
        relative = Path(*beside.relative_to(self._home).parts) if beside.is_relative_to(self._home) else beside
        shown = self._shown_home / relative if not relative.is_absolute() else relative
        return [(beside, shown), (self._home, self._shown_home), *((d, given) for given, d in self._extra)]
