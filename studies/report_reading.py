"""What a reader of a report should know before its numbers, and what no report can tell."""

READING = (
    (
        "Spread",
        "How far transistors, pairs or chips differ from each other: sigma (one standard deviation), bands, 99.9 % lines, "
        "filled areas in figures. More samples do not make it smaller; a better process or a larger device does.",
    ),
    (
        "Uncertainty",
        "How well a number is known from the finite number of samples drawn (a solved field: from the finite mesh): the "
        "interval beside each number, thin lines with caps in figures. In 95 of 100 repeats such an interval holds the true value of this model. More samples make "
        "it smaller. It holds neither the error of the process file's numbers nor that of the formulas, and these are "
        "usually larger: the notes of each section name them.",
    ),
    (
        "Width and length",
        "W and L are as drawn unless “electrical” is said; the electrical ones are those of the channel that conducts, "
        "drawn plus the process file's bias.",
    ),
    (
        "Edges",
        "The two sides of the channel, where the gate's field also reaches the silicon, or its own oxide, beside it. They "
        "move the threshold the more the narrower the device is.",
    ),
    (
        "Neighbours",
        "Two devices side by side on one die share its doping and oxide; what still differs between them (number and "
        "place of dopants, rough edges and oxide, a measured remainder) is their local scatter.",
    ),
)
LIMITS = (
    "Planar bulk transistors. A path of equal stages, a pair and an array are the only circuits.",
    "Intervals are sampling error alone. What the process file does not know, nobody draws: give the measured pair "
    "coefficient, two widths for the edges, and the variations from your own wafers, in this order of effect.",
    "The formulas of edges and short channel are each tested alone and multiplied together, which neither derivation proves.",
    "A stage's delay is charge over current: no slopes, no coupling, no series resistance.",
)
