"""The report: one page that opens offline, and its figures."""
