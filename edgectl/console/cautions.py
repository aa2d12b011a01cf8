"""What must be said wherever people look: start-up, report, documents."""

from __future__ import annotations

from typing import Final

CAUTIONS: Final = (
    "Advice only: the operator decides. Final authority stays with the site's safety instrumented"
    " systems and its licensed people.",
    "No protective function may depend on this software, and it never reads from or writes to a"
    " safety system (IEC 61511-1: independence of the safety instrumented system).",
    "Follow the site's management of change, local codes and the security zone rules of IEC 62443.",
    "Advice is an event, not an alarm: an alarm requires a response (ISA-18.2).",
    "Results of bad quality are never used (OPC 10000-4, 7.39.1).",
    "Security mode None is for testing only (OPC 10000-2).",
)
