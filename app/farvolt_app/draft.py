"""The draft: the text of a plan as it is being edited, beside the results of its last valid state.

A text that is not a valid plan is kept all the same, with its faults; the results stay those of the last text that
was valid. Every change can be undone. A draft never changes: each action returns another one.
"""

from dataclasses import dataclass, replace
from pathlib import Path

from farvolt import planfile
from farvolt.errors import Fault, PlanError, RulebookError, SaveError
from farvolt.plan import Plan
from farvolt.results import Study
from farvolt.study import study

UNDO_LIMIT = 200
"""Steps that can be taken back."""


@dataclass(frozen=True, slots=True)
class Draft:
    """A plan being edited. `path` is its file, if it has one, and `stamp` that of the text last opened or saved."""

    text: str
    valid_text: str | None
    """The last text that was valid; the results are its."""
    results: Study | None
    """None until the text has been valid once."""
    faults: tuple[Fault, ...]
    """What is wrong with `text`; empty when the results are its own."""
    undo_texts: tuple[str, ...] = ()
    redo_texts: tuple[str, ...] = ()
    path: Path | None = None
    stamp: str | None = None
    autosave: bool = False
    """Whether every valid change is written to `path` at once."""
    autosaved: bool = False
    """Whether that happened since the plan was opened: its file's previous version is the one from before."""

    @property
    def plan(self) -> Plan | None:
        """The plan of the last valid text."""
        return self.results.plan if self.results else None

    @property
    def saved(self) -> bool:
        """Whether the text is the one that was opened or saved last."""
        return self.stamp is not None and planfile.stamp(self.text) == self.stamp

    def edit(self, text: str) -> "Draft":
        """The draft with another text, which can be undone; the same draft where the text is the same."""
        if text == self.text:
            return self
        undo = (*self.undo_texts, self.text)[-UNDO_LIMIT:]
        return replace(self._with(text), undo_texts=undo, redo_texts=())

    def undo(self) -> "Draft":
        """The draft before the last change; the same draft where there is none."""
        if not self.undo_texts:
            return self
        changed = self._with(self.undo_texts[-1])
        return replace(changed, undo_texts=self.undo_texts[:-1], redo_texts=(*self.redo_texts, self.text))

    def redo(self) -> "Draft":
        """The draft with the last change that was undone made again."""
        if not self.redo_texts:
            return self
        changed = self._with(self.redo_texts[-1])
        return replace(changed, undo_texts=(*self.undo_texts, self.text), redo_texts=self.redo_texts[:-1])

    def save(self, path: Path) -> "Draft":
        """Write the text to a file: its own as long as nobody else changed it, or a new one. Raises SaveError."""
        own = self.path is not None and path.absolute() == self.path.absolute()
        if not path.parent.is_dir():
            raise SaveError(f"{path}: there is no folder {path.parent}; nothing was written")
        planfile.save(path, self.text, expected=self.stamp if own else None)
        saved = replace(self, path=path, stamp=planfile.stamp(self.text), autosave=self.autosave and own)
        # A rulebook of the user's own is looked for beside the file, so another folder may change the results.
        return saved if own else saved._with(self.text)

    def autosave_now(self) -> "Draft":
        """Write a valid change to its file, where autosave is on; NAME.previous stays what was there at the start.

        Raises SaveError when the file is another one by now, or cannot be written.
        """
        if not self.autosave or self.path is None or self.faults or self.saved:
            return self
        planfile.save(self.path, self.text, expected=self.stamp, keep_previous=not self.autosaved)
        return replace(self, stamp=planfile.stamp(self.text), autosaved=True)

    def _with(self, text: str) -> "Draft":
        results, faults = examine(text, self.path)
        if results is None:
            return replace(self, text=text, faults=faults)
        return replace(self, text=text, valid_text=text, results=results, faults=())


def begin(text: str, path: Path | None = None, *, new: bool = False) -> Draft:
    """A draft of a text, valid or not; `path` is the file that it was read from. A `new` text is nowhere else yet."""
    results, faults = examine(text, path)
    stamp = None if new else planfile.stamp(text)
    return Draft(text, text if results else None, results, faults, path=path, stamp=stamp)


def open_file(path: Path) -> Draft:
    """The draft of a plan file, valid or not. Raises PlanError where there is no text to be had."""
    return begin(planfile.read_text(path), path)


def examine(text: str, path: Path | None) -> tuple[Study | None, tuple[Fault, ...]]:
    """The study of a text, or what keeps it from having one."""
    folder = path.parent if path else None
    try:
        plan = planfile.parse(text)
    except PlanError as error:
        return None, tuple(error.faults)
    try:
        return study(plan, folder, margins=False), ()
    except (PlanError, RulebookError) as error:
        return None, tuple(planfile.placed(error, text).faults)
