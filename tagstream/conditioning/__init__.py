"""Stage 2, conditioning: what a feed decoded to ordered blocks.

In this order: tags are judged in arrival order (late, jump, overflow, outside the vouched
interval), inputs become channels and get their delay, tags are put in time order, what lies
outside live time is dropped, dead time is cut. What happens to a tag depends on the tags before
it alone, never on where a piece ends. Nothing here knows formats or tallies.
"""

from tagstream.conditioning.conditioner import Conditioned, conditioned

__all__ = ["Conditioned", "conditioned"]
