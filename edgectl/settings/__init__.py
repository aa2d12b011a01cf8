"""The site file: one TOML file that describes a column and how it is advised.

May import `records` only (and pydantic). Open `site.py` first for what the file
holds, then `load.py` for how it is read and `checks.py` for the rules between
keys. `reference.py` writes `deploy/notes/site-file.md` from all of these.
"""

from edgectl.settings.findings import Finding, SiteFileError
from edgectl.settings.load import json_schema, load_site, parse_site
from edgectl.settings.site import Site
from edgectl.settings.tags import Role

__all__ = ["Finding", "Role", "Site", "SiteFileError", "json_schema", "load_site", "parse_site"]
