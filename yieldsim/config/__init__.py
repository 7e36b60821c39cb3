"""The study file: its schema, and YAML to validated plan."""

from __future__ import annotations

from yieldsim.config.loader import load, load_run

__all__ = ["load", "load_run"]
