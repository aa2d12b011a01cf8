"""Log lines of a service: one JSON object each, on standard error."""

from __future__ import annotations

import logging
import sys

import structlog


def log_to_stderr() -> None:
    """For `run`. The same field names everywhere; the cycle's line is made in `runtime`."""
    structlog.configure(
        processors=[
            structlog.processors.add_log_level,
            structlog.processors.TimeStamper(fmt="iso", utc=True, key="time"),
            structlog.processors.JSONRenderer(),
        ],
        logger_factory=structlog.PrintLoggerFactory(sys.stderr),
        cache_logger_on_first_use=True,
    )
    # It logs every lost connection with a traceback; ours are events with a sentence.
    logging.getLogger("asyncua").setLevel(logging.CRITICAL)
