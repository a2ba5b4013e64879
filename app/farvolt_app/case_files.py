"""The numbers of all cases as CSV files in a folder: points, runs, loads and sources."""

from pathlib import Path

from farvolt import planfile
from farvolt.errors import SaveError
from farvolt.results import Study
from farvolt_app.frames import frames
from farvolt_app.textsafe import csv_text


def write(study: Study, folder: Path) -> list[str]:
    """Write the files, each whole or not at all, and name those that were there already: each is kept as
    NAME.previous. Makes the folder where it is missing. Raises SaveError."""
    texts = {f"{name}.csv": frame.map(_cell).to_csv(index=False) for name, frame in frames(study).items()}
    kept = []
    for name, text in texts.items():
        path = folder / name
        try:
            folder.mkdir(exist_ok=True)
            if path.is_file():
                planfile.write_whole(path.with_name(f"{name}.previous"), path.read_bytes())
                kept.append(name)
            planfile.write_whole(path, text.encode("utf-8-sig"))
        except OSError as error:
            raise SaveError(f"{path}: cannot be written ({error.strerror})") from None
    return kept


def _cell(value: object) -> object:
    """Text stays text in a spreadsheet."""
    return csv_text(value) if isinstance(value, str) else value
