"""The live page: what a port tells, kept as a state, served to browsers, with orders coming back.

Modules load where they are used; nothing is imported here.
"""

__all__: list[str] = []
