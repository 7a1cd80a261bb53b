from modesolve.cross_section import CrossSection
from modesolve.mode import Mode, solve_modes
