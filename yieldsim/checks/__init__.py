"""The published references behind ``yieldsim verify``."""
