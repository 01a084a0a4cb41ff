"""WHERE and WHEN crystals are born."""
