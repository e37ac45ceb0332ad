"""What may happen where something can hurt, what to do and what not to do.

Facts from published safety sheets and handbooks: sealed nickel-metal-hydride cells vent hydrogen and oxygen when
overcharged, reversed or shorted (maker's safety sheets); makers end a charge between 45 °C and 55 °C and none above
60 °C (Panasonic's charge handbook for these cells).
"""

LOCAL_RULES = "Local codes and licensed practice come first, and a reading from afar is no protection."

HOT = (
    "An overcharged or abused NiMH pack vents hydrogen, which burns, and a hot pack can burn you.",
    "Do not approach a pack that hisses, smells, smokes or swells. Keep sparks, switches and people away from it.",
    "If it is safe to reach, stop the charge: cover the panel or open its isolator.",
    "A panel in the light cannot be switched off.",
    "Let the pack cool outdoors. Do not open, crush, wet or seal it, and do not use it again before it was checked.",
    "The liquid inside is caustic: flush eyes and skin with much water and see a doctor.",
    LOCAL_RULES,
)

FROST = (
    "Below 0 °C a pack takes little charge, and what it does not take becomes gas that may open its vent.",
    "Lower the charging current to a trickle, or stop the charge until the pack is above 0 °C.",
    "Do not warm it with anything that has a flame.",
    LOCAL_RULES,
)

VISIT = (
    "Before you open a box, cover or isolate the panel: it delivers current whenever there is light.",
    "Do not work outdoors in a storm. Leave fixed wiring to licensed people.",
    LOCAL_RULES,
)
