"""Speed measured beside an anchor in the same run: each module here has `rows(only)`, one dict a row."""
