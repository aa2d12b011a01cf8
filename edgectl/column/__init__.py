"""The tray-by-tray column: one model with options, in stage equations.

A stage sees only its neighbours and the shared inputs. The mathematics comes
from an argument (`xp`: NumPy or CasADi), so the same lines serve numbers and
symbols. May import `records` and `properties` only. Open `stages.py` first,
then `layout.py` (what the options are) and `assembly.py` (the stages in a row).

Internal units: kmol, h, K, kPa, kJ/kmol; duties in kW.
"""
