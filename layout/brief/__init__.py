"""Reading and checking the TOML brief: the only package that knows the file's keys."""
