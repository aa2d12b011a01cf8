"""Every decision of a cycle, and no waiting.

Pure functions of values: nothing here reads a clock, logs or awaits. May import
`records` only. Open `decide.py` first (what one cycle tells the people), then
`standing.py` (the table), `validation.py` (what is believed), `vetting.py` (what
a plan must pass) and `pace.py` (when a person is asked for a hand).
"""
