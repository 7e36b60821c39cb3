"""Results to files a person reads: tables, plots and one page."""
