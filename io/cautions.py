"""What nobody must forget beside the numbers, as four plain sentences; imports nothing, so that help is quick."""

CAUTIONS = (
    "An aid to judgement, not a safety device.",
    "Nobody below a suspended or dropped load, whatever the numbers say.",
    "Local mining and hoisting regulations and a licensed surveyor's practice come first.",
    "Check that electronics are allowed in the atmosphere before you bring any.",
)
