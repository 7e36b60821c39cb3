"""``yieldsim schema``: the JSON Schema of the study file, for editors."""

from __future__ import annotations

import argparse
import json

EXAMPLE = """example:
  yieldsim schema > yieldsim.schema.json

An editor with a YAML language server then checks a study as it is typed, once its first line reads
  # yaml-language-server: $schema=yieldsim.schema.json
"""


def arguments(parser: argparse.ArgumentParser) -> None:
    """Add nothing: the command has no options."""


def run(options: argparse.Namespace) -> int:
    """Print the schema."""
    from yieldsim.config.schema import json_schema

    print(json.dumps(json_schema(), indent=2))
    return 0
