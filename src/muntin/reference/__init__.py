"""Every command, option, key, column and JSON field, told from its one declaration."""
