"""The report: one self-contained page, its sections as plain records, and how they are shown."""
