"""Cap templates: the scalp laid flat in gores, true to scale, as PDF and SVG."""
