"""From the catalogue to a release: tables, their dictionary, the gate they pass, the folder they stand in."""
