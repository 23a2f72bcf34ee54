"""The numbers: numpy and scipy only, nothing of HTTP, schemas or units."""
