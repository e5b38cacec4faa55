"""The terminal program over `solver`: a console, a headless command and an SQLite plant file."""
