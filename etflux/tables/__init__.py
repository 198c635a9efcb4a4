"""Parameter tables: CSV and TOML files with their sources."""
