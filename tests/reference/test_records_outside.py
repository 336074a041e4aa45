"""Records against ObsPy: response removal, array rotation, instrument metadata; and the FDSN codes."""

from pathlib import Path

import numpy as np
import obspy
import pytest

from rupture.records.array import array_motion
from rupture.records.metadata import quantity_of
from rupture.records.report import UnusableError
from rupture.records.response import Corners, deconvolve, instrument_band, instrument_of
from rupture.records.units import parse_unit

OBSPY = Path(obspy.__file__).parent


@pytest.mark.filterwarnings("ignore::UserWarning")
@pytest.mark.parametrize(("output", "order"), [("DISP", 0), ("VEL", 1), ("ACC", 2)])
def test_against_obspy_remove_response(output, order):
    """IU.ANMO: the example record and metadata of a real broadband sensor that ObsPy carries, poles, zeros and FIRs."""
    inventory = obspy.read_inventory(str(OBSPY / "io/stationxml/tests/data/IRIS_single_channel_with_response.xml"))
    channel = inventory[0][0][0]
    trace = obspy.read()[2]
    trace.stats.sampling_rate = channel.sample_rate
    trace.detrend("linear")
    trace.taper(0.05)
    code = ".".join([inventory[0].code, inventory[0][0].code, channel.location_code, channel.code])
    trace.id = code
    trace.stats.starttime = channel.start_date + 86400
    # A cosine of frequency and not of its logarithm: with the pass band wide, what differs is the instrument alone.
    corners = Corners(0.1, 0.2, 8.0, 9.0)
    mine = deconvolve(
        trace.data, 0.0, channel.sample_rate, instrument_of(channel.response, True), order, corners, 60.0,
        (0.0, trace.stats.delta, trace.stats.npts),
    )  # fmt: skip
    theirs = trace.copy().remove_response(
        inventory, output=output, pre_filt=(0.1, 0.2, 8.0, 9.0), water_level=60, taper=False, zero_mean=False
    )
    inside = slice(200, -200)
    assert np.abs(mine - theirs.data)[inside].max() < 0.02 * np.abs(theirs.data[inside]).max()


@pytest.mark.parametrize(
    ("file", "unit", "order", "quantity"),
    [
        ("core/tests/data/response_radian_per_second.xml", "RAD/S", 1, "rotation"),
        ("io/stationxml/tests/data/IRIS_single_channel_with_response.xml", "M/S", 1, "translation"),
        ("core/tests/data/SL_BOJS_LHZ.xml", "nm/s", 1, "translation"),
    ],
)
def test_real_instrument_metadata(file, unit, order, quantity):
    path = next(OBSPY.rglob(Path(file).name), None)
    assert path is not None
    channel = obspy.read_inventory(str(path))[0][0][0]
    found = instrument_of(channel.response, True)
    assert (found.unit_name, found.unit.order, found.unit.quantity) == (unit, order, quantity)
    low, high = instrument_band(found, channel.sample_rate or 20.0, 40.0)
    assert low < 0.1 < 0.2 < high


def test_accelerometers_of_obspys_own_metadata():
    """Strong-motion channels M/S**2: flat in acceleration from the lowest frequency to the anti-alias filter."""
    path = next(OBSPY.rglob("Modified_IRIS_response_level_station.xml"))
    channels = [c for n in obspy.read_inventory(str(path)) for s in n for c in s if c.code.startswith("HN")]
    assert channels
    for channel in channels:
        found = instrument_of(channel.response, True)
        assert found.unit.order == 2
        size = np.abs(found.transfer(np.geomspace(0.01, 0.2 * channel.sample_rate, 20)))
        assert size.max() / size.min() < 1.1


def test_response_that_cannot_be_evaluated_falls_back_to_the_sensitivity():
    path = next(OBSPY.rglob("TM.SKLT.__.BHZ_faulty_response.xml"))
    found = instrument_of(obspy.read_inventory(str(path))[0][0][0].response, True)
    assert found.stages is None
    assert "cannot be evaluated" in found.notes[-1]


def test_polynomial_response_is_refused():
    path = next(OBSPY.rglob("polynomial_response.xml"))
    with pytest.raises(UnusableError, match="sensitivity is missing"):
        instrument_of(obspy.read_inventory(str(path))[0][0][0].response, True)


def test_units_that_obspy_knows_are_known_alike():
    """Spellings in the unit table of obspy.core.inventory.response 1.5.1."""
    names = {
        0: ["M", "NM", "CM", "MM"],
        1: ["M/S", "M/SEC", "NM/S", "NM/SEC", "CM/S", "CM/SEC", "MM/S", "MM/SEC"],
        2: ["M/S**2", "M/(S**2)", "M/SEC**2", "M/(SEC**2)", "M/S/S", "NM/S**2", "CM/(SEC**2)", "MM/SEC**2"],
    }
    size = {"M": 1.0, "N": 1e-9, "C": 1e-2}
    for order, spellings in names.items():
        for name in spellings:
            unit = parse_unit(name)
            assert unit.order == order
            assert unit.scale == (1e-3 if name.startswith("MM") else size[name[0]])


@pytest.mark.parametrize("level", [True, False], ids=["level ground", "hilly"])
def test_array_rotation_against_obspy_sample_by_sample(level):
    """obspy.signal.array_analysis.array_rotation_strain (Spudich et al. 1995), run in full."""
    from obspy.signal.array_analysis import array_rotation_strain

    rng = np.random.default_rng(3)
    places = np.column_stack([rng.uniform(-1, 1, (6, 2)), np.zeros(6) if level else rng.uniform(-0.3, 0.3, 6)])
    places -= places.mean(axis=0)
    motion = rng.standard_normal((6, 3, 40))
    full = array_rotation_strain(
        np.arange(6), *(motion[:, i].T for i in range(3)), vp=np.sqrt(3.0), vs=1.0, array_coords=places, sigmau=1.0
    )
    data, good = array_motion(places, motion, motion, np.ones(motion.shape, bool), 0.0, 0.1)
    assert good.all()
    for row, name in zip(data[3:], ("ts_w1", "ts_w2", "ts_w3"), strict=True):
        np.testing.assert_allclose(row, full[name], atol=1e-9)


@pytest.mark.parametrize(
    ("code", "quantity"),
    [
        ("HJZ", "rotation"), ("BJE", "rotation"), ("EJ3", "rotation"), ("HHZ", "translation"), ("SLN", "translation"),
        ("HNE", "translation"), ("EHZ", "translation"), ("DPZ", "translation"), ("LDO", None), ("HDF", None), ("LKS", None), ("VMU", None),
        ("Z", None),
    ],
)  # fmt: skip
def test_fdsn_instrument_codes(code, quantity):
    """FDSN source identifiers 1.0: H, L, N seismometers and accelerometers, J rotational sensor; others are not ground motion."""
    assert quantity_of(f"XX.AAA.00.{code}") == quantity
