"""What the descriptions of SINEX_TRO and writers' habits add to the plain file: each is read.

The files are built from the descriptions of versions 0.01, 1.00 and 2.00, so the expected values
are those written here.
"""

from dataclasses import replace

import numpy as np
import pytest

from fieldgen.readers.sinex_tro import read_sinex_tro

from .fixtures import OLD_DIALECT, SinexFile, block, solution, write

NEW = SinexFile()


def described(names, units, *lines, base=NEW):
    """A file with other fields."""
    description = block(
        "TROP/DESCRIPTION", f" TROPO PARAMETER NAMES         {names}",
        f" TROPO PARAMETER UNITS         {units}",
    )  # fmt: skip
    return replace(base, description=description, solution=solution(*lines))


def with_keywords(*lines):
    """The plain file with further keywords in its description."""
    keywords = "".join(f" {line}\n" for line in lines)
    return replace(NEW, description=NEW.description.replace("-TROP", keywords + "-TROP"))


CASES = {
    "all fields of 2.00": (
        described(
            "TRODRY TROTOT STDDEV TROWET TGNTOT TGETOT IWV PRESS TEMDRY HUMREL WVPRES WMTEMP NSAT",
            "1e+03 1e+03 1e+03 1e+03 1e+03 1e+03 1 1 1 1 1 1 1",
            " ARDA00ATL 2030:031:00000 2230.1 2401.5 1.3 171.4 0.1 0.2 25.1 1012 285 80 11 275 9",
        ),
        [2.4015], [0.0013],
    ),
    "a repeated STDDEV after other fields": (
        described(
            "TROWET STDDEV TROTOT STDDEV", "1e+03 1e+03 1e+03 1e+03",
            " ARDA00ATL 2030:031:00000 171.4 9.9 2401.5 1.3",
        ),
        [2.4015], [0.0013],
    ),
    "metres": (
        described("TROTOT STDDEV", "1 1", " ARDA00ATL 2030:031:00000 2.4015 0.0013"),
        [2.4015], [0.0013],
    ),
    "missing before scaling": (
        described(
            "TROTOT STDDEV", "1 1", " ARDA00ATL 2030:031:00000 2.4015 -999",
            " ARDA00ATL 2030:031:03600 -999.0 0.0013",
        ),
        [2.4015], [np.nan],
    ),
    "names on two lines": (
        replace(NEW, description=NEW.description.replace(
            "TROTOT STDDEV TGNTOT", "TROTOT STDDEV\n TROPO PARAMETER NAMES         TGNTOT"
        )),
        [2.4015, 2.4025, 2.3015, 2.3025], [0.0013, 0.0014, 0.0015, 0.0016],
    ),
    "SOLUTION_FIELDS_2": (
        replace(OLD_DIALECT, description=OLD_DIALECT.description.replace(
            "TGNTOT STDDEV", "\n SOLUTION_FIELDS_2             TGNTOT STDDEV"
        )),
        [2.4015, 2.4025], [0.0013, 0.0014],
    ),
    "older names": (
        replace(
            OLD_DIALECT,
            description=OLD_DIALECT.description.replace(
                "TROTOT STDDEV TGNTOT STDDEV", "TROTOT TROTOT_SIG TRWET TRWET_SIG MTEMP WVAPOR"
            ),
            solution=solution(" ARDA 98:031:00000 2401.5 1.3 171.4 1.1 280.0 25.1"),
        ),
        [2.4015], [0.0013],
    ),
    "1.00 in the header": (
        replace(OLD_DIALECT, header=OLD_DIALECT.header.replace("0.01", "1.00")),
        [2.4015, 2.4025], [0.0013, 0.0014],
    ),
    "other keywords": (
        with_keywords(
            "REFRACTIVITY COEFFICIENTS     77.60 70.4 373900", "GEOID MODEL                   X",
            "TROPO SAMPLING INTERVAL       300",
        ),
        [2.4015, 2.4025, 2.3015, 2.3025], [0.0013, 0.0014, 0.0015, 0.0016],
    ),
    "a line in front of the header": (
        replace(NEW, header="*\n" + NEW.header),
        [2.4015, 2.4025, 2.3015, 2.3025], [0.0013, 0.0014, 0.0015, 0.0016],
    ),
    "no data agency in the header": (
        replace(NEW, header="%=TRO 2.00 XYZ 2030:032:03600"),
        [2.4015, 2.4025, 2.3015, 2.3025], [0.0013, 0.0014, 0.0015, 0.0016],
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", CASES)
def test_read_sinex_tro_reads(tmp_path, name):
    sinex, delays, sigmas = CASES[name]
    records = read_sinex_tro(write(tmp_path, sinex.text()))
    np.testing.assert_allclose(records.ztd, delays, rtol=1e-12)
    np.testing.assert_allclose(records.ztd_sigma, sigmas, rtol=1e-12)
    assert records.created == np.datetime64(
        "1998-02-01T01:00" if "98:032" in sinex.header else "2030-02-01T01:00"
    )


def test_read_sinex_tro_takes_second_86400_as_the_next_midnight(tmp_path):
    sinex = replace(NEW, solution=NEW.solution.replace("031:03600", "031:86400"))
    records = read_sinex_tro(write(tmp_path, sinex.text()))
    assert records.time[1] == np.datetime64("2030-02-01T00:00:00")
