"""What flows through a cycle: frozen values and their invariants.

Imports nothing of edgectl. Times are plant time, seconds since the Unix epoch
(UTC). Values are in the tag's own engineering unit. Follow one value through
`readings` -> `measurements` -> `plan` -> `advice` -> `entries`.
"""
