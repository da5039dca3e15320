"""One function per command: parsed arguments in, text for standard output and exit code out."""
