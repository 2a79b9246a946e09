"""Studies: against closed forms, the equation of signal to noise, and the limits themselves."""

import math

import numpy as np
import pytest
from astropy.stats import signal_to_noise_oir_ccd
from astropy.table import Table
from numpy.testing import assert_allclose, assert_equal

import simimg
from simimg.errors import InputError
from simimg.scene.file import load_scene, replace
from simimg.scene.steps import steps_from_text
from simimg.study.checkpoint import Checkpoint
from simimg.study.sweep import Varied, make, plan, sweep
from simimg.study.sweeptable import write_sweep
from tests.study.pairs import SPACE, pair_scene

ARCSEC = math.pi / 180.0 / 3600.0


def over(key, values):
    return [Varied(key, steps_from_text(values))]


def column(made, name):
    return np.array([row[name] for row in made.rows])


def test_rayleigh_against_aperture_is_airys_ring(tmp_path):
    # 1.21967 lambda/D: Airy 1835, first zero of J1.
    scene = replace(pair_scene(tmp_path), {"air": None})
    made = sweep(scene, vary=over("telescope.aperture", "0.5 m:4 m:4:log"))
    apertures = np.array([0.5, 1.0, 2.0, 4.0])
    wavelength = column(made, "wavelength") * 1e-9
    expected = 1.21967 * wavelength / apertures / ARCSEC
    assert_allclose(column(made, "diffraction_rayleigh"), expected, rtol=1e-4)


def test_signal_to_noise_against_exposure_is_the_ccd_equation(tmp_path):
    scene = star_scene(tmp_path)
    made = sweep(scene, vary=over("exposure.time", "1 s:1000 s:4:log"))
    frame = simimg.expose(scene, keep=("psf",))
    # Equivalent pixels of the PSF, from its own image: 1 / sum of squares, in detector pixels.
    few = simimg.expose(
        replace(
            scene,
            {
                "star.0.electrons": "1 electron",
                "sky": None,
                "star.0.magnitude": None,
                "camera.dark_current": None,
            },
        ),
        keep=("expected",),
    )
    image = few.expected.astype(float)
    pixels = 1.0 / float((image**2).sum())
    seconds = np.array([1.0, 10.0, 100.0, 1000.0])
    truth = frame.truth
    rate = float(truth["electrons"][0]) / 20.0
    sky = float(frame.value("SKYLVL")) / 20.0
    expected = [signal_to_noise_oir_ccd(t, rate, sky, 0.5, 4.0, pixels) for t in seconds]
    # The image holds all of the light to 1e-3; the equation itself is exact.
    assert_allclose(column(made, "snr"), expected, rtol=1e-3)
    one = simimg.limits(replace(scene, {"exposure.time": "1000 s"})).objects[0]
    assert column(made, "snr")[-1] == one.snr


def test_signal_to_noise_obeys_the_equation_to_a_millionth(tmp_path):
    scene = star_scene(tmp_path)
    made = sweep(scene, vary=over("exposure.time", "1 s:1000 s:4:log"))
    seconds = np.array([1.0, 10.0, 100.0, 1000.0])
    rate, sky = star_rates(scene)
    # One number of pixels must fit all times: taken from the first, tried on the others.
    snr = column(made, "snr")
    noise = (rate * seconds / snr) ** 2 - rate * seconds
    pixels = noise / ((sky + 0.5) * seconds + 4.0**2)
    expected = [signal_to_noise_oir_ccd(t, rate, sky, 0.5, 4.0, pixels[0]) for t in seconds]
    assert_allclose(snr, expected, rtol=1e-6)


def star_rates(scene):
    frame = simimg.expose(scene)
    return float(frame.truth["electrons"][0]) / 20.0, float(frame.value("SKYLVL")) / 20.0


def star_scene(folder):
    text = SPACE[: SPACE.index("[[pair]]")].replace("[exposure]", '[exposure]\ntime = "20 s"')
    text = text.replace('electrons = "4 electron"', "surface_brightness = 19.0")
    text = text.replace(
        'read_noise = "3 electron"', 'read_noise = "4 electron"\ndark_current = "0.5 electron/s"'
    )
    path = folder / "star.toml"
    path.write_text(text + '[[star]]\nlabel = "S"\nmagnitude = 15.0\n')
    return load_scene(path)


def test_delivered_width_against_seeing(tmp_path):
    # A telescope and a pixel that do not show: the FWHM is 0.9758634 lambda/r0, that is the seeing
    # times (lambda / 500 nm)^(-1/5).
    scene = replace(
        pair_scene(tmp_path),
        {
            "telescope.aperture": "60 m",
            "camera.pixel_scale": "0.01 arcsec",
            "band": {"centre": "600 nm", "width": "1 nm"},
        },
    )
    made = sweep(scene, vary=over("air.seeing", "0.5 arcsec:2 arcsec:3"))
    expected = np.array([0.5, 1.25, 2.0]) * (600.0 / 500.0) ** -0.2
    assert_allclose(column(made, "delivered_fwhm"), expected, rtol=2e-3)


def test_a_point_is_the_limits_and_the_trials_of_its_scene(tmp_path):
    scene = pair_scene(tmp_path)
    made = sweep(scene, vary=over("pair.0.separation", "0.9 arcsec,1.4 arcsec"), trials=12)
    there = replace(scene, {"pair.0.separation": "1.4 arcsec"})
    found = simimg.limits(there).objects[0]
    told = simimg.trials(there, count=12)[0]
    row = made.rows[1]
    assert row["bound_separation"] == found.bound.separation_arcsec
    assert row["pair_sparrow"] == found.delivered.sparrow_arcsec
    assert row["fraction_sparrow"] == told.sparrow.fraction_resolved
    assert row["fraction_sparrow_high"] == told.sparrow.high
    assert row["scatter_separation"] == told.scatter.separation_arcsec
    assert row["trials"] == 12


def test_workers_change_nothing(tmp_path):
    scene = pair_scene(tmp_path)
    vary = over("pair.0.separation", "0.6 arcsec:1.4 arcsec:3")
    alone = sweep(scene, vary=vary, trials=4)
    shared = sweep(scene, vary=vary, trials=4, workers=2)
    for one, other in zip(alone.rows, shared.rows, strict=True):
        assert_equal(list(one.values()), list(other.values()))


def test_two_keys_make_a_grid(tmp_path):
    scene = replace(pair_scene(tmp_path), {"air": None})
    vary = [*over("telescope.aperture", "1 m,2 m"), *over("camera.read_noise", "0:8 electron:3")]
    made = sweep(scene, vary=vary)
    assert made.points[1] == ("1 m", "4 electron")
    bounds = column(made, "bound_separation").reshape(2, 3)
    assert (np.diff(bounds, axis=1) > 0).all()
    # Stars of so many electrons: the wider telescope's narrower PSF falls between the pixels.
    assert (bounds[1] > bounds[0]).all()


def test_the_scenes_own_study_and_pair(tmp_path):
    scene = pair_scene(tmp_path)
    second = dict(scene.document["pair"][0], label="Q", separation="1.5 arcsec", x=30.0)
    scene = replace(
        scene,
        {
            "pair": [*scene.document["pair"], second],
            "study": {"vary": {"air.seeing": ["0.6 arcsec", "0.8 arcsec"]}, "pair": "Q"},
        },
    )
    made = sweep(scene)
    assert made.points == (("0.6 arcsec",), ("0.8 arcsec",))
    assert_allclose(column(made, "separation"), 1.5, rtol=1e-12)
    assert_allclose(column(sweep(scene, pair="P"), "separation"), 0.9, rtol=1e-12)


@pytest.mark.parametrize(
    ("vary", "says"),
    [
        ([], "nothing is to be varied"),
        (over("telescope.aperture", "-1 m:1 m:3"), r"telescope\.aperture"),
        (over("telescope.apperture", "1 m:2 m:3"), "apperture"),
        (over("pair.3.separation", "1:2 arcsec:2"), "pair"),
        (over("title", "a,b"), "changes nothing"),
        (over("air.seeing", "1:2 arcsec:2") * 2, "twice"),
        ([*over("a", "1,2"), *over("b", "1,2"), *over("c", "1,2")], "one or two"),
        (
            [
                *over("air.seeing", "1:2 arcsec:200"),
                *over("telescope.aperture", "1:2 m:200"),
            ],
            "more than",
        ),
    ],
)
def test_wrong_studies_are_refused_before_any_work(tmp_path, vary, says):
    with pytest.raises(InputError, match=says):
        sweep(pair_scene(tmp_path), vary=vary)


def test_a_set_up_without_an_answer_does_not_stop_the_others(tmp_path):
    # An image quality sharper than diffraction cannot be had from any air.
    scene = replace(pair_scene(tmp_path), {"air": {"image_quality": "0.8 arcsec"}})
    made = sweep(scene, vary=over("air.image_quality", "0.01 arcsec,0.8 arcsec"))
    assert math.isnan(made.rows[0]["delivered_fwhm"])
    assert "image_quality" in made.problems[0]
    assert made.problems[1] == ""
    assert made.rows[1]["delivered_fwhm"] == pytest.approx(0.8, rel=0.2)


def test_table_is_read_by_astropy_with_units(tmp_path):
    scene = pair_scene(tmp_path)
    made = sweep(scene, vary=over("pair.0.separation", "0.9 arcsec,1.4 arcsec"), trials=4)
    write_sweep(made, tmp_path / "s.ecsv")
    table = Table.read(tmp_path / "s.ecsv")
    promised = [
        "pair_0_separation",
        "diffraction_rayleigh",
        "diffraction_sparrow",
        "delivered_fwhm",
        "delivered_rayleigh",
        "delivered_sparrow",
        "snr",
        "bound_separation",
        *(
            f"fraction_{name}{part}"
            for name in ("rayleigh", "sparrow")
            for part in ("", "_low", "_high")
        ),
    ]
    assert set(promised) <= set(table.colnames)
    assert table["pair_0_separation"].unit == "arcsec"
    assert table["delivered_fwhm"].unit == "arcsec"
    assert list(table["pair_0_separation"]) == [0.9, 1.4]
    assert table.meta["SIMULATE"] is True
    write_sweep(made, tmp_path / "again.ecsv")
    assert (tmp_path / "s.ecsv").read_bytes() == (tmp_path / "again.ecsv").read_bytes()


def test_an_interrupted_study_goes_on(tmp_path):
    scene = pair_scene(tmp_path)
    vary = over("pair.0.separation", "0.6 arcsec:1.4 arcsec:3")
    planned = plan(scene, vary=vary)
    first = Checkpoint(tmp_path / "s.ecsv", planned)

    class StoppedError(Exception):
        pass

    def keep(number, row):
        first.keep(number, row)
        if number == 1:
            raise StoppedError

    with pytest.raises(StoppedError):
        make(planned, keep=keep)
    # The line that an interrupt cut short is worked out again.
    text = first.path.read_bytes()
    first.path.write_bytes(text[: text.rindex(b"row") + 9])
    second = Checkpoint(tmp_path / "s.ecsv", planned)
    assert set(second.done) == {0}
    seen = []
    made = make(planned, done=second.done, keep=lambda number, row: seen.append((number, row)))
    assert [number for number, _ in seen] == [1, 2]
    assert made.rows == sweep(scene, vary=vary).rows
    for number, row in seen:
        second.keep(number, row)
    assert set(Checkpoint(tmp_path / "s.ecsv", planned).done) == {0, 1, 2}


def test_another_studys_points_are_not_taken(tmp_path):
    scene = pair_scene(tmp_path)
    mine = plan(scene, vary=over("air.seeing", "0.6 arcsec,0.8 arcsec"))
    other = plan(scene, vary=over("air.seeing", "0.6 arcsec,0.9 arcsec"))
    Checkpoint(tmp_path / "s.ecsv", other).keep(0, {"snr": 1.0})
    with pytest.raises(InputError, match="another study"):
        Checkpoint(tmp_path / "s.ecsv", mine)
    assert Checkpoint(tmp_path / "s.ecsv", mine, fresh=True).done == {}
