"""Command line: one thin module a command; nothing heavy is imported before a command needs it."""
