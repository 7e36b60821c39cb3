"""One file per weather format, each making a Weather."""
