"""On what a row's numbers rest, in words: said wherever the numbers are opened."""

from __future__ import annotations

from worksheet.oxygen.readings import Flag

_CONTENT = (
    (Flag.DYSHAEMOGLOBINS_ASSUMED, "dyshaemoglobins never measured: the usual share is assumed"),
    (Flag.DYSHAEMOGLOBINS_CARRIED, "dyshaemoglobins carried from an earlier sample"),
    (Flag.SATURATION_CALCULATED, "saturation calculated from PO2, not measured"),
    (Flag.SATURATION_FROM_FINGER, "saturation from the finger: the sample has none"),
    (Flag.HB_CARRIED, "haemoglobin carried from an earlier sample"),
    (Flag.DISSOLVED_NOT_COUNTED, "no PO2: dissolved oxygen is not counted"),
)
# Chawla 2004, Chest 126:1891: 5.2 points, SD 5.1; Varpula 2006, Intensive Care Med 32:1336: 4.2, SD 6.3 (pages and the
# second from memory)
_CENTRAL = (
    "central venous blood, an estimate of mixed venous: ± leaves out how far the two stand apart; in the ill the "
    "central saturation read 4 to 5 points higher, SD 5 to 6 (Chawla 2004; Varpula 2006)"
)
_FLOW = ((Flag.FLOW_CARRIED, "flow carried from another time"),)
_VENOUS = (
    (Flag.CENTRAL_VENOUS, _CENTRAL),
    (Flag.VENOUS_HB_SHARED, "the arterial haemoglobin was used for the venous sample"),
)
_USE = ((Flag.VO2_MEASURED, "VO2 as measured, because Fick's could not be had"),)
_FIO2 = ((Flag.FIO2_ESTIMATED, "FiO2 of a low-flow device is an estimate"),)
_PRESSURE = ((Flag.BAROMETRIC_STANDARD, "barometric pressure is the unit's constant, not measured"),)
_WARMTH = ((Flag.TEMPERATURE_ASSUMED, "37 °C assumed for the blood in the body"),)
_FINGER = ((Flag.SPO2_ABOVE_97, "SpO2 above 97 %: S/F is not reported"),)

BASIS = {
    "cao2": _CONTENT, "dissolved_share": _CONTENT, "do2": _CONTENT + _FLOW, "do2i": _CONTENT + _FLOW,
    "saturation": _CONTENT[2:4], "inactive": _CONTENT[:2],
    "cvo2": _CONTENT + _VENOUS, "avdo2": _CONTENT + _VENOUS, "o2er": _CONTENT + _VENOUS,
    "vo2": _CONTENT + _FLOW + _VENOUS + _USE, "vo2i": _CONTENT + _FLOW + _VENOUS + _USE,
    "pf_ratio": _FIO2, "sf_ratio": _FIO2 + _FINGER, "rox_index": _FIO2, "oxygenation_index": _FIO2,
    "pao2_alveolar": _FIO2 + _PRESSURE, "aa_gradient": _FIO2 + _PRESSURE, "a_a_ratio": _FIO2 + _PRESSURE,
    "shunt_fraction": _CONTENT + _VENOUS + _FIO2 + _PRESSURE, "extractable_o2": _CONTENT + _WARMTH,
    "co2_gap": _VENOUS[:1], "co2_o2_ratio": _CONTENT + _VENOUS,
}  # fmt: skip


def basis_words(flags: int, name: str) -> list[str]:
    """What a quantity of a row with these flags rests on."""
    return [words for bit, words in BASIS.get(name, ()) if flags & bit]
