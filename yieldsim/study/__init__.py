"""The year's account: hours, sums, comparisons, and where results are kept."""
