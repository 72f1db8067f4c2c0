"""The commands of ``calibration``: one file each, which parses, calls and prints."""
