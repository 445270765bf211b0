"""The parts of the reader: safe access to files, TOML and CSV as tables, and what a part folder may say."""
