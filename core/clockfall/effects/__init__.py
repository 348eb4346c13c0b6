"""First floor: the seam between clockfall and its effects.

This is all that an effect needs to import besides `clockfall.binary`:

    from clockfall.effects import Card, Parameter, Predicted, Rate, Rates, Settings, hook
"""

from clockfall.effects.card import APPARENT, INTRINSIC, Card, OwnChoice, OwnParameter, Parameter, Rate
from clockfall.effects.contributions import Caution, ClosedFormTrack, Delay, Predicted, Rates, Settings
from clockfall.effects.hooks import hook

__all__ = [
    "APPARENT",
    "INTRINSIC",
    "Card",
    "Caution",
    "ClosedFormTrack",
    "Delay",
    "OwnChoice",
    "OwnParameter",
    "Parameter",
    "Predicted",
    "Rate",
    "Rates",
    "Settings",
    "hook",
]
