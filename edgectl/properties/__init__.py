"""Physical properties: pure functions of temperature, pressure and composition.

Imports numpy nowhere: the mathematics comes as the argument `xp`, any module
with `exp`, `log` and `sqrt` (numpy, casadi, math). So one function serves plain
floats, arrays and CasADi symbols alike. A composition is a sequence with one
entry per component, each entry a float, an array over the stages or a symbol.

Imports nothing else of edgectl. Every correlation names its source and its
range; `ranges.check_range` is for the border, where temperatures are numbers.
Open `vapour_pressure.py` first.
"""
