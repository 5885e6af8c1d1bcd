"""Log lines as JSON objects, one a line: no bodies, no credentials, no queries."""

import json
import logging
import sys
from datetime import UTC, datetime

REQUESTS = logging.getLogger("hourwright.requests")
FAULTS = logging.getLogger("hourwright.faults")


class JsonLines(logging.Formatter):
    """Writes a record as one line of JSON; what `extra={"fields": {...}}` holds becomes members of it."""

    def format(self, record: logging.LogRecord) -> str:
        """Write one line: time in UTC, level, logger, event, fields, and a stack trace where there is one."""
        line: dict[str, object] = {
            "time": datetime.fromtimestamp(record.created, UTC).isoformat(timespec="milliseconds"),
            "level": record.levelname.lower(),
            "logger": record.name,
            "event": record.getMessage(),
        }
        line |= getattr(record, "fields", {})
        if record.exc_info:
            line["trace"] = self.formatException(record.exc_info)
        return json.dumps(line, ensure_ascii=True, default=str)


def log_as_json_lines(level: int = logging.INFO) -> None:
    """Send all log records of this process to standard error as JSON lines."""
    handler = logging.StreamHandler(sys.stderr)
    handler.setFormatter(JsonLines())
    root = logging.getLogger()
    root.handlers[:] = [handler]
    root.setLevel(level)
    # One line whenever a request finds no idle thread: noise under load, and no fault.
    logging.getLogger("waitress.queue").setLevel(logging.ERROR)
