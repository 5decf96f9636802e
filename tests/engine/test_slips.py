"""Words for a refusal: the likely slip where it is plain, and values quoted on one line."""

import pytest

from engine.reading.slips import likely_slip, nearest, one_line


@pytest.mark.parametrize(
    ("field", "value", "says"),
    [
        ("fio2", 40.0, "per cent is never used in case files, 40 per cent is 0.4"),
        ("sao2", 95.0, "per cent is never used in case files, 95 per cent is 0.95"),
        ("hb_g_per_dl", 98.0, "g/L is never used in case files, 98 g/L is 9.8"),
        ("paco2_mmhg", 4.5, "kPa is never used in case files, 4.5 kPa is 33.8"),
        ("barometric_mmhg", 1013.0, "hPa is never used in case files, 1013 hPa is 760"),
        ("barometric_mmhg", 101.3, "kPa is never used in case files, 101.3 kPa is 760"),
        ("tidal_volume_ml", 0.42, "L is never used in case files, 0.42 L is 420"),
        ("vco2_ml_per_min", 0.2, "L/min is never used in case files, 0.2 L/min is 200"),
        ("minute_volume_l_per_min", 9000.0, "mL/min is never used in case files, 9000 mL/min is 9"),
        ("height_cm", 1.64, "m is never used in case files, 1.64 m is 164"),
        ("temperature_c", 98.6, "°F is never used in case files, 98.6 °F is 37"),
        ("ph", 74.0, "the decimal point is perhaps lost: 7.4"),
        ("ph_low", 730.0, "the decimal point is perhaps lost: 7.3"),
        ("fio2", "0,4", "a number stands without quotes"),
        ("mode", "Volume", "perhaps volume"),
        ("conditions", "Raised ICP", "perhaps raised_icp"),
        # and where nothing is plain
        ("fio2", 0.1, ""),
        ("fio2", 400.0, ""),
        ("fio2", "much", ""),
        ("fio2", float("nan"), ""),
        ("fio2", True, ""),
        ("peep_cmh2o", 50.0, ""),
        ("ph", 1.0, ""),
        ("mode", "xyz", ""),
        ("mode", 3, ""),
        ("label", "", ""),
    ],
)
def test_a_likely_slip_is_named_where_it_is_plain(field, value, says):
    assert likely_slip(field, value) == says


def test_words_of_a_refusal():
    assert nearest("fio", ["fio2", "ph"]) == "perhaps fio2"
    assert nearest("fio2", ["fio2", "ph"]) == ""
    assert one_line("a\nb\x00\u2028ü") == r"a\nb\x00\u2028ü"
