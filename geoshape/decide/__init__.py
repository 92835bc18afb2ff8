"""Decisions on measured tables: flag, match, group, compare, summarise, redraw."""
