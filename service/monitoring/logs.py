"""One line for each thing that is logged, on standard error: as JSON, or for a person at a terminal."""

from __future__ import annotations

import json
import logging
import sys
from datetime import UTC, datetime
from typing import Any, Literal

OF_EVERY_RECORD = frozenset(vars(logging.makeLogRecord({}))) | {"message", "asctime", "taskName"}
"""What logging itself puts into a record; whatever else is there came as `extra`."""

VALUES_OF_A_ROW = "DETAIL:"
"""How PostgreSQL begins the line of an error that repeats what stood in a row."""


class _Lines(logging.Formatter):
    """A formatter whose tracebacks keep the values of rows to themselves."""

    def formatException(self, ei: Any) -> str:
        """Return the traceback as text."""
        lines = super().formatException(ei).splitlines()
        return "\n".join(line for line in lines if not line.lstrip().startswith(VALUES_OF_A_ROW))

    @staticmethod
    def given_beside(record: logging.LogRecord) -> dict[str, Any]:
        """Return what the writer gave beside the message."""
        return {name: value for name, value in vars(record).items() if name not in OF_EVERY_RECORD}


class JsonLines(_Lines):
    """Time, level, logger and message, what the writer gave as `extra`, the traceback where there is one."""

    def format(self, record: logging.LogRecord) -> str:
        """Return one line. Every character that could end it or steer a terminal is escaped."""
        told: dict[str, Any] = {
            "time": datetime.fromtimestamp(record.created, UTC).isoformat(timespec="milliseconds"),
            "level": record.levelname.lower(),
            "logger": record.name,
            "message": record.getMessage(),
        }
        told |= self.given_beside(record)
        if record.exc_info:
            told["exception"] = self.formatException(record.exc_info)
        return json.dumps(told, default=str)


class TextLines(_Lines):
    """The same in words, with the traceback on lines of its own."""

    def format(self, record: logging.LogRecord) -> str:
        """Return one line, and those of the traceback."""
        more = "".join(
            f" {name}={json.dumps(value, default=str)}" for name, value in self.given_beside(record).items()
        )
        said = f"{self.formatTime(record)} {record.levelname} {record.name} {record.getMessage()}{more}"
        return f"{said}\n{self.formatException(record.exc_info)}" if record.exc_info else said


def to_standard_error(
    level: Literal["debug", "info", "warning", "error"], how: Literal["json", "text"]
) -> None:
    """Send everything of this weight and above to standard error."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(JsonLines() if how == "json" else TextLines())
    logging.basicConfig(level=level.upper(), handlers=[handler], force=True)
    # it tells of every look at the schema, and /readyz looks often
    logging.getLogger("alembic").setLevel(logging.WARNING)
