import modesolve.guard  # noqa: F401 - first: it looks for a hidden package
from modesolve.cross_section import CrossSection
from modesolve.mode import Mode, solve_modes
