"""The constants the service knows. A new one is a new file here and one line below."""

from service.constants.base import Constant
from service.constants.coercivity import COERCIVITY
from service.constants.continuity import CONTINUITY
from service.constants.decay_rate import DECAY_RATE
from service.constants.friedrichs import FRIEDRICHS
from service.constants.inf_sup import INF_SUP
from service.constants.poincare import POINCARE
from service.constants.trace import TRACE

CONSTANTS: dict[str, Constant] = {
    constant.id: constant for constant in (FRIEDRICHS, POINCARE, TRACE, COERCIVITY, CONTINUITY, INF_SUP, DECAY_RATE)
}
