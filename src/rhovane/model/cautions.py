"""What must be said wherever results are shown."""

CAUTIONS = (
    "rhovane looks for changes in how series move together. It does not measure exposure, judge compliance with any "
    "limit, forecast, or warn the public.",
    "Association is not cause: hints are starting points for checking instruments, site records and weather.",
    "A quiet night does not prove that instruments are sound: some faults, such as a steady scale change or one that "
    "affects all stations alike, leave ranks unchanged.",
    "Intervals and significance are estimates that depend on the chosen recipe, window and reference.",
    "Results from unverified readings may change when readings are revised; alerts never alter source readings.",
    "Reference methods, the network's quality system, the regulator's decisions, local rules and the judgement of a "
    "competent, where required licensed, professional come first.",
)
DEMO_CAUTION = "Demo data are invented."
CAUTION = " ".join(CAUTIONS)
