"""Files of a study: what is asked, what was run, what is at fault."""
