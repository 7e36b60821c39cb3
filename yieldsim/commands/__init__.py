"""One file per verb of the command line, each with ``run(arguments) -> int``."""
