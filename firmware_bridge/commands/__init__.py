"""The commands of ``firmware_bridge``: one file each, which parses, calls and prints."""
