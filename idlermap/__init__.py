"""The door of the command ``idlermap``; the work is in materials, modesolve and phasematch."""
