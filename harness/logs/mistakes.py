"""The mistakes of one file, collected so that they are told in one go."""

from __future__ import annotations

from typing import NoReturn

from harness.errors import FileMistakes, Mistake

MOST_LISTED = 20


class Mistakes:
    """Collects; raises FileMistakes with the first ``MOST_LISTED`` by line, and how many more there are."""

    def __init__(self, file: str) -> None:
        self.file = file
        self._found: list[Mistake] = []

    def add(self, line: int | None, key: str, text: str, remedy: str = "") -> None:
        self._found.append(Mistake(self.file, line, key, text, remedy))

    def stop(self, line: int | None, key: str, text: str, remedy: str = "") -> NoReturn:
        """Add one after which reading on makes no sense, and raise."""
        self.add(line, key, text, remedy)
        raise FileMistakes(self._listed())

    def stop_if_any(self) -> None:
        if self._found:
            raise FileMistakes(self._listed())

    def _listed(self) -> list[Mistake]:
        in_order = sorted(self._found, key=lambda m: m.line or 0)
        shown, left = in_order[:MOST_LISTED], in_order[MOST_LISTED:]
        if left:
            noun = "mistake is" if len(left) == 1 else "mistakes are"
            shown.append(
                Mistake(self.file, left[0].line, "", f"{len(left)} more {noun} not listed, from this line on.")
            )
        return shown
