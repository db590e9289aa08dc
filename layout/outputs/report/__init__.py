"""report.html: one page with a head to turn, tables, charts and words."""
