"""Plans and judges plate screens of chromatography conditions."""
