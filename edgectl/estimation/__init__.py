"""What is believed about the column: model tracking, feed composition, bias.

May import `records`, `properties` and `column`; CasADi is allowed here, because
this code runs in the worker process only. Open `tracking.py` first;
`dynamics.py` turns the stage equations into functions that can be solved.
"""
