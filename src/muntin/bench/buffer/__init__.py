"""Chemistry of buffers: water, acids, the pH of a liquid, and the base form that a pH takes."""
