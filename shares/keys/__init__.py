"""Threshold keys: born among custodians or dealt to them, then used by a quorum and never assembled."""
