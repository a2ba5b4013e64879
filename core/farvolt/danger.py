"""What the watts wasted in a bad joint do to it, in words. Common practice, from memory: provisional.

A joint loses heat through its own small surface and the cables that leave it; some watts are enough to take a terminal
of the usual sizes to where its insulation or its holder gives way.
"""

_STEPS = (
    (0.5, "hardly warm; but a loose joint gets worse, so make it good"),
    (2.0, "warm to the touch, and it will get worse: make it good soon"),
    (5.0, "hot: a small terminal or fuse holder discolours and loosens further; do not load it until it is made good"),
    (15.0, "burns the skin, softens insulation and holders; switch this circuit off until it is made good"),
    (float("inf"), "chars insulation and can set fire to what is near; switch off now"),
)


def danger(watts: float) -> str:
    """The danger of a joint that turns `watts` into heat."""
    return next(words for most, words in _STEPS if watts < most)
