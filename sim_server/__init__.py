"""The rehearsal plant: a simulated column with its people, behind a real OPC UA server.

Its own process (`python -m sim_server`), so that the runtime meets it only as it
would meet a plant. May import `edgectl.properties`, `edgectl.records.units` and
`edgectl.clock`, nothing else of edgectl, and knows nothing of the controller.

Open `signals.py` first: the page between the plant (`plant`, its column, base
layer and instruments) and the rest. Then `simulation.py` (plant, drill,
watchdog and crew, step by step), `server.py` with `nodes.py` and `access.py`
(OPC UA), and `run.py` (pace and end).
"""
