"""Sentences that several commands end with."""

CAUTION = (
    "Design and training aid: not a safety system and no part of one. Trips, relief and safety functions stay "
    "independent of it;\nlocal codes and licensed or otherwise competent people decide."
)
