"""The study file: its schema, and YAML to validated plan."""
