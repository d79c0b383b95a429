"""One small file a command: parse, call, print."""
