"""True rigs: invented plants that the program under test has never seen, moved forward in their own small steps.

Nothing here imports gainwright, so that a record made here, or a controller run here, judges it from outside.
"""

from .controller import SheetController
from .rig import Log, Motion, TrueRig, closed_loop, open_loop
from .sensor import Sensor

__all__ = ["Log", "Motion", "Sensor", "SheetController", "TrueRig", "closed_loop", "open_loop"]
