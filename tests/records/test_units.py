import numpy as np
import pytest

from rupture.records.report import UnusableError
from rupture.records.units import parse_unit


@pytest.mark.parametrize(
    ("name", "quantity", "order", "scale"),
    [
        ("m", "translation", 0, 1.0),
        ("M/S", "translation", 1, 1.0),
        ("m/s", "translation", 1, 1.0),
        ("M/SEC", "translation", 1, 1.0),
        ("meters/second", "translation", 1, 1.0),
        ("metre per second", "translation", 1, 1.0),
        ("nm/s", "translation", 1, 1e-9),
        ("NM/S", "translation", 1, 1e-9),
        ("um/s", "translation", 1, 1e-6),
        ("µm/s", "translation", 1, 1e-6),
        ("micrometers/second", "translation", 1, 1e-6),
        ("MM/S", "translation", 1, 1e-3),
        ("cm", "translation", 0, 1e-2),
        ("m/s**2", "translation", 2, 1.0),
        ("M/S**2", "translation", 2, 1.0),
        ("m/s^2", "translation", 2, 1.0),
        ("m/s/s", "translation", 2, 1.0),
        ("m/s2", "translation", 2, 1.0),
        ("M/(SEC**2)", "translation", 2, 1.0),
        ("m.s-2", "translation", 2, 1.0),
        ("m*s**-2", "translation", 2, 1.0),
        ("nm/s**2", "translation", 2, 1e-9),
        ("CM/S**2", "translation", 2, 1e-2),
        ("gal", "translation", 2, 1e-2),
        ("mgal", "translation", 2, 1e-5),
        ("rad", "rotation", 0, 1.0),
        ("rad/s", "rotation", 1, 1.0),
        ("RAD/S", "rotation", 1, 1.0),
        ("radians/second", "rotation", 1, 1.0),
        ("rad/s**2", "rotation", 2, 1.0),
        ("RAD/SEC**2", "rotation", 2, 1.0),
        ("nrad/s", "rotation", 1, 1e-9),
        ("urad/s", "rotation", 1, 1e-6),
        ("mrad", "rotation", 0, 1e-3),
        ("nanoradians/s", "rotation", 1, 1e-9),
        ("deg/s", "rotation", 1, np.pi / 180),
    ],
)
def test_spellings(name, quantity, order, scale):
    unit = parse_unit(name)
    assert (unit.quantity, unit.order) == (quantity, order)
    assert unit.scale == pytest.approx(scale, rel=1e-12)


@pytest.mark.parametrize(
    "name", ["V", "counts", "Pa", "m/m", "degC", "C", "g", "T", "m**2/s", "strain", "m/s**3", "gal/s", "rd/s"]
)
def test_anything_else_is_refused_by_name(name):
    with pytest.raises(UnusableError, match=rf"'{name}'".replace("*", r"\*")):
        parse_unit(name)


@pytest.mark.parametrize("name", [None, "", "  "])
def test_absent(name):
    with pytest.raises(UnusableError, match="no input unit"):
        parse_unit(name)
