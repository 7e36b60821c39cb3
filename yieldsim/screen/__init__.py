"""Whether a weather file can be believed: findings, limits and mending."""
