"""Everything with a side effect: reading, writing, scheduling, drawing; computing and judging are called from here."""
