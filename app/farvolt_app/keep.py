"""Drafts kept for as long as the pages are served, so that a page that is loaded again has lost nothing.

Each session writes its draft under a name that cannot be guessed, which its address carries. A session that starts
with such a name takes a copy and writes under a name of its own: two tabs never write to the same file.
"""

import contextlib
import json
import os
import re
import secrets
from dataclasses import replace
from pathlib import Path

from farvolt import planfile
from farvolt.errors import PlanError
from farvolt_app import draft as drafts
from farvolt_app.draft import Draft
from farvolt_app.server import FOLDER_VARIABLE

_NAME = re.compile(r"[0-9a-f]{32}")


def new_name() -> str:
    """A name that cannot be guessed."""
    return secrets.token_hex(16)


def keep(name: str, draft: Draft) -> None:
    """Write a draft down under a name, if there is a folder for it. A failure is no reason to stop the work."""
    file = _file(name)
    if file is None:
        return
    path = str(draft.path) if draft.path else None
    kept = {"text": draft.text, "valid_text": draft.valid_text, "path": path, "stamp": draft.stamp,
            "autosave": draft.autosave, "autosaved": draft.autosaved}  # fmt: skip
    with contextlib.suppress(OSError):
        planfile.write_whole(file, json.dumps(kept).encode())


def kept(name: str) -> Draft | None:
    """The draft kept under a name, with the results of its last valid text; None where there is none."""
    file = _file(name)
    if file is None or not file.is_file():
        return None
    try:
        found = json.loads(planfile.read_text(file))
    except (PlanError, ValueError):
        return None
    path = Path(found["path"]) if found["path"] else None
    first = drafts.begin(found["valid_text"] or found["text"], path)
    return replace(
        first.edit(found["text"]), undo_texts=(), stamp=found["stamp"], autosave=found["autosave"] is True,
        autosaved=found["autosaved"] is True,
    )  # fmt: skip


def _file(name: str) -> Path | None:
    folder = os.environ.get(FOLDER_VARIABLE, "")
    return Path(folder) / f"{name}.json" if folder and _NAME.fullmatch(name) else None
