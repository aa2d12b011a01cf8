"""What people start and look at: the commands, the live view, the report.

May import everything below it, never CasADi and never the simulated plant
(which is another process). Open `commands.py` first: one function for each
command. `history.py` reads a journal, `figures.py` counts what it says,
`report.py` with `charts.py`, `column_drawing.py` and `svg.py` makes the page;
`live.py` draws the terminal; `demo.py` and `run.py` start the runtime.
"""
