"""The planning problem, its engines, and the planner that the worker runs.

May import `records`, `properties`, `column` and `estimation`; CasADi is allowed
here, because this code runs in the worker process only. Open `problem.py`
first (what is asked), then `collocation.py` (the reference engine) and
`planner.py` (a request in, a plan out).
"""
