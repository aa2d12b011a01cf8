"""The solver in its own process: watched, killed when late, replaced at once.

The parent's side (`handle`, `process`, `frames`, `messages`) never imports
CasADi: it runs in the event loop. The other side (`child`) loads whatever the
brain needs and is a pure function of each request. May import `ports` and
`records` (and `clock`); knows no other edge.

Open `handle.py` first, then `child.py`; `brain.py` is what a solver must offer.
"""
