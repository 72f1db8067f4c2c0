"""The commands of ``metro``: one file each, which parses, calls and prints."""
