"""The constants the service knows. A new one is a new file here and one line below."""

from service.constants.base import Constant
from service.constants.friedrichs import FRIEDRICHS
from service.constants.poincare import POINCARE

CONSTANTS: dict[str, Constant] = {constant.id: constant for constant in (FRIEDRICHS, POINCARE)}
