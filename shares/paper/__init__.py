"""Shares on paper: the line code that corrects typing, the sheet, and reading it back. Knows documents only."""
