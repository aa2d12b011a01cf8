"""Test doubles that are shipped with the code they stand in for. Production never imports this.

Open `story.py` first (the production loop on virtual time, with scripted faults),
then `oracle.py` (what must hold whatever happens). `virtual_time.py` is the clock,
`memory_ports.py` the edges, `toy.py` a plant and a planner small enough to read.
"""
