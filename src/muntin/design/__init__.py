"""Choice of the next conditions."""
