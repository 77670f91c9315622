"""The documents: what a share and a record hold, how they are read strictly and written. FORMAT.md specifies every
field."""
