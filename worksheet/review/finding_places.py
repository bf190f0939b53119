"""Where on the entry form a finding is said, and which findings tell of the patient rather than of the typing."""

# Which input a finding about the whole slip is shown at.
PLACES = {
    "po2-above-alveolar": "po2",
    "po2-looks-like-kpa": "po2",
    "po2-looks-like-mmhg": "po2",
    "pco2-looks-like-kpa": "pco2",
    "pco2-looks-like-mmhg": "pco2",
    "so2-against-curve": "so2",
    "arterial-looks-venous": "site",
    "fractions-do-not-add": "o2hb",
    "venous-above-arterial": "so2",
    "hb-jump": "hb",
    "ph-pco2-hco3-disagree": "bicarbonate",
    "calculated-as-measured": "so2",
    "co-and-ci-disagree": "cardiac_index",
    "p50-out-of-range": "so2",
    "room-air-with-oxygen": "fio2",
    "gap-reading-false": "spo2",
    "gap-dyshaemoglobin": "spo2",
    "gap-send-co-oximetry": "spo2",
    "gap-beyond-methb": "spo2",
    "cohb-hidden": "cohb",
    "hypoxaemia-agreed": "spo2",
    "hypoxaemia-occult": "spo2",
    "pf-from-estimated-fio2": "fio2",
    "spo2-above-97": "spo2",
    "duplicate-sample": "clock",
}
# These tell of the patient, not of a slip of the key: said at once, without asking whether the value was checked.
TELLS = frozenset(
    {
        "gap-reading-false",
        "gap-dyshaemoglobin",
        "gap-send-co-oximetry",
        "gap-beyond-methb",
        "cohb-hidden",
        "hypoxaemia-agreed",
        "hypoxaemia-occult",
        "o2er-out-of-range",
    }
)
SAID_ALREADY = (
    "-impossible",
    "-unlikely",
    "time-in-future",
    "before-admission",
    "site-not-stated",
    "saturation-without-site",
    "fio2-fraction-or-percent",
    "saturation-like-fraction",
)
# What follows from a value that is doubted by itself is not asked a second time.
FROM_WRONG = {
    "po2-looks-like-kpa": ("po2",),
    "po2-looks-like-mmhg": ("po2",),
    "pco2-looks-like-kpa": ("pco2",),
    "pco2-looks-like-mmhg": ("pco2",),
    "po2-above-alveolar": ("po2", "pco2", "fio2"),
    "so2-against-curve": ("po2", "pco2", "ph", "so2"),
    "arterial-looks-venous": ("po2", "so2"),
    "p50-out-of-range": ("po2", "pco2", "ph", "so2"),
    "ph-pco2-hco3-disagree": ("ph", "pco2", "bicarbonate"),
    "hb-jump": ("hb",),
}
