"""The folders in which nights are kept."""

import time
from pathlib import Path

from orchestrator.cli.failing import Failed
from orchestrator.ledger.schema import FILE_NAME


def new_folder(into: Path, name: str) -> Path:
    """A folder for a night, named after the evening and the sequence; made, and empty."""
    stem = f"{time.strftime('%Y-%m-%d-%H%M')}-{name}"
    for number in range(1, 1000):
        folder = into / (stem if number == 1 else f"{stem}-{number}")
        try:
            folder.mkdir(parents=True)
        except FileExistsError:
            continue
        except OSError as error:
            raise Failed(f"--into {into}: no folder can be made there: {error.strerror}") from error
        return folder
    raise Failed(f"--into {into}: a thousand nights of that name are there already")


def newest_night(into: Path) -> Path:
    """The night whose ledger was written last. Raises Failed if there is none."""
    ledgers = sorted(into.glob(f"*/{FILE_NAME}"), key=lambda file: file.stat().st_mtime)
    if not ledgers:
        raise Failed(f"there is no night in {into}")
    return ledgers[-1].parent
