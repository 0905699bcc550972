"""Routines that are not ours: described by a file, run in a process of their own, used like any other routine.

Start from `drivers.foreign.foreign.ForeignRoutine`; this package itself imports nothing, so that the process of a routine starts fast.
"""
