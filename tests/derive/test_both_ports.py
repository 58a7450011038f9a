"""Both ports at hot: every way gives the device back, whatever the bench reflects; what does not suffice is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.both_ports import (
    HotTwoPort,
    drive_slope,
    each_sideband,
    free_of_port_1,
    from_probe_states,
    with_drive_sweep,
)
from benchrun.derive.hot import distance_bound, two_sidebands
from benchrun.derive.scattering import Scattering, Waves
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2.2e9, 2.4e9, 5)
SOURCE, LOAD = 0.1 * np.exp(0.8j), 0.05 * np.exp(-1.1j)


def hot_device(rng, shape=(5,)) -> HotTwoPort:
    s = Scattering(*(make.disc(rng, shape, size) for size in (0.4, 0.03, 4.0, 0.5)))
    return HotTwoPort(s, Scattering(*(make.disc(rng, shape, size) for size in (0.1, 0.01, 1.5, 0.2))))


def on_bench(above: HotTwoPort, below: HotTwoPort, probes, source=SOURCE, load=LOAD) -> tuple[Waves, Waves]:
    """Solve device and bench for the waves of one probe state; probes are what the sources send: (1+, 1-, 2+, 2-).

    Unknown are (a1+, a1-*, a2+, a2-*), with ai = source_i + G_i bi, the bench's reflections alike at both sidebands.
    """
    zero = np.zeros_like(above.s.s11)
    rows = [
        [above.s.s11, above.t.s11, above.s.s12, above.t.s12],
        [np.conj(v) for v in (below.t.s11, below.s.s11, below.t.s12, below.s.s12)],
        [above.s.s21, above.t.s21, above.s.s22, above.t.s22],
        [np.conj(v) for v in (below.t.s21, below.s.s21, below.t.s22, below.s.s22)],
    ]
    m = np.moveaxis(np.array([[v + zero for v in row] for row in rows]), (0, 1), (-2, -1))
    g = np.diag([source, np.conj(source), load, np.conj(load)])
    sent = np.array([probes[0], np.conj(probes[1]), probes[2], np.conj(probes[3])]).reshape(4, 1)
    a = np.linalg.solve(np.eye(4) - g @ m, np.broadcast_to(sent, (*zero.shape, 4, 1)))
    b = (m @ a)[..., 0]
    a = a[..., 0]
    upper = Waves(a[..., 0], b[..., 0], a[..., 2], b[..., 2])
    lower = Waves(*(np.conj(v) for v in (a[..., 1], b[..., 1], a[..., 3], b[..., 3])))
    return upper, lower


def states(above, below, *probes, sources=None):
    """The waves of several probe states, stacked: (N, F)."""
    sources = sources or [SOURCE] * len(probes)
    pairs = [on_bench(above, below, p, source=g) for p, g in zip(probes, sources, strict=True)]
    return tuple(Waves(*(np.stack(w) for w in zip(*side, strict=True))) for side in zip(*pairs, strict=True))


def assert_same(found: HotTwoPort, truth: HotTwoPort, atol=1e-10) -> None:
    for ours, theirs in zip(found, truth, strict=True):
        make.assert_equal(ours, theirs.matrices(), atol)


@given(st.integers(0, 10**6))
def test_probe_at_either_port_gives_the_whole_response(seed):
    device = hot_device(np.random.default_rng(seed))
    upper, lower = states(device, device, (0, 0, 0.01, 0), (0.01, 0, 0, 0))
    found, residual = from_probe_states(upper, lower)
    assert_same(found, device)
    assert residual.b2.max() < 1e-12


def test_reading_port_2_alone_is_off_by_what_the_bench_does_at_port_1():
    """The reason for all this: the one-port reading is off S22, within the bound; both ports are not."""
    device = hot_device(np.random.default_rng(1))
    upper, lower = states(device, device, (0, 0, 0.01, 0), (0.01, 0, 0, 0))
    alone, _ = two_sidebands(upper.a2[0], upper.b2[0], lower.a2[0], lower.b2[0])
    off = np.abs(alone - device.s.s22)
    through = 20 * np.log10(
        np.max((np.abs(device.s.s12) + np.abs(device.t.s12)) * (np.abs(device.s.s21) + np.abs(device.t.s21)))
    )
    assert 1e-4 < off.max() < 1.2 * distance_bound(through, 20 * np.log10(abs(SOURCE)))
    found, _ = from_probe_states(upper, lower)
    assert np.abs(found.s.s22 - device.s.s22).max() < 1e-10


def test_two_terminations_of_port_1_do_for_a_probe_at_port_2():
    rng = np.random.default_rng(2)
    device = hot_device(rng)
    device = HotTwoPort(device.s._replace(s12=device.s.s12 + 0.1), device.t._replace(s12=device.t.s12 + 0.06j))
    upper, lower = states(device, device, (0, 0, 0.01, 0), (0, 0, 0.01, 0), sources=[0.7, -0.7j])
    assert_same(from_probe_states(upper, lower)[0], device, 1e-9)


def test_more_states_average_noise_and_the_residual_shows_it():
    rng = np.random.default_rng(3)
    device, noise = hot_device(rng), 1e-6
    probes = [p for k in range(12) for p in ((0, 0, 0.01 * np.exp(1j * k), 0), (0.01 * np.exp(2j * k), 0, 0, 0))]
    upper, lower = states(device, device, *probes)
    upper, lower = (
        w._replace(**{n: getattr(w, n) + make.disc(rng, w.b1.shape, noise) for n in ("b1", "b2")})
        for w in (upper, lower)
    )
    found, residual = from_probe_states(upper, lower)
    assert np.abs(found.s.s22 - device.s.s22).max() < 3e-4
    assert 0.3 * noise < residual.b2.max() < noise
    assert residual.independence.min() > 0.05


def test_sidebands_that_differ_take_probes_above_and_below():
    rng = np.random.default_rng(4)
    above, below = hot_device(rng), hot_device(rng)
    upper, lower = states(above, below, (0, 0, 0.01, 0), (0, 0, 0, 0.01), (0.01, 0, 0, 0), (0, 0.01, 0, 0))
    found = each_sideband(upper, lower)
    assert_same(found[0], above)
    assert_same(found[1], below)
    _, residual = from_probe_states(upper, lower)
    assert residual.b2.max() > 1e-4, "one device for both sidebands does not fit, and says so"


def test_known_response_to_a1_takes_one_probe():
    device = hot_device(np.random.default_rng(5))
    upper, lower = on_bench(device, device, (0, 0, 0.01, 0))
    assert_same(free_of_port_1(upper, lower, device.s.s11, device.t.s11, device.s.s21, device.t.s21), device)


def swept_device(a1, a2):
    """A device in closed form around its pump: b2 = (10 - 2 |a1|^2) a1 + (0.3 + 0.1 |a1|) a2 + 0.1 a1^2 a2*, and b1."""
    b1 = (0.2 + 0.05j * np.abs(a1) ** 2) * a1 + 0.04j * a2 + 0.01 * a1**2 * np.conj(a2)
    b2 = (10 - 2 * np.abs(a1) ** 2) * a1 + (0.3 + 0.1 * np.abs(a1)) * a2 + 0.1 * a1**2 * np.conj(a2)
    return b1, b2


def sidebands_of(a1, a2_pump, small1, small2):
    """Put pump and small tones through the device in the time domain; return (pump, upper, lower) waves."""
    t = np.arange(64) / 64

    def tones(pump, small):
        return (
            pump[..., None]
            + small[0][..., None] * np.exp(2j * np.pi * t)
            + small[1][..., None] * np.exp(-2j * np.pi * t)
        )

    x1, x2 = tones(a1, small1), tones(a2_pump, small2)
    spectra = [np.fft.fft(v, axis=-1) / 64 for v in (x1, *swept_device(x1, x2), x2)]
    return tuple(Waves(*(np.ascontiguousarray(spectra[k][..., at]) for k in (0, 1, 3, 2))) for at in (0, 1, 63))


def test_the_drive_sweep_stands_in_for_a_probe_at_port_1():
    """A device in the time domain that knows nothing of S and T; pump into both ports, all tones at both ports."""
    drives = np.linspace(0.3, 1.2, 19)
    a1 = drives[:, None] * np.exp(1j * np.array([0.4, -1.0]))
    eps = 1e-5
    small1 = [eps * 0.1 * np.exp(0.3j) * np.ones(a1.shape), eps * 0.03j * np.ones(a1.shape)]
    small2 = [eps * np.ones(a1.shape, complex), eps * (0.05 - 0.02j) * np.ones(a1.shape)]
    pump, upper, lower = sidebands_of(a1, 0.05 * a1, small1, small2)
    found = with_drive_sweep(pump, upper, lower)
    size, turn = np.abs(a1), np.exp(2j * np.angle(a1))
    middle = slice(1, -1)
    # the device's own derivatives, with a2 = 0.05 a1 at the pump in them
    s22, t22 = 0.3 + 0.1 * size, 0.1 * size**2 * turn
    np.testing.assert_allclose(found.s.s22[middle], s22[middle], rtol=0, atol=3e-3)
    np.testing.assert_allclose(found.t.s22[middle], t22[middle], rtol=0, atol=3e-3)
    alone = two_sidebands(upper.a2, upper.b2, lower.a2, lower.b2)[0]
    assert np.abs(alone - s22)[middle].min() > 0.4, "a1 beside the pump must matter for it to be taken out"
    np.testing.assert_allclose(found.s.s12[middle], 0.04j, rtol=0, atol=3e-4)
    np.testing.assert_allclose(found.t.s12[middle], (0.01 * size**2 * turn)[middle], rtol=0, atol=3e-4)


def test_the_drive_sweep_is_exact_without_pump_into_port_2():
    """g is a parabola in |a1|, so its slope by parabolas is exact, and so is all the rest."""
    drives = np.linspace(1.2, 0.3, 10)
    a1 = drives[:, None] * np.exp(0.4j)
    eps = 1e-6 * np.ones(a1.shape)
    pump, upper, lower = sidebands_of(a1, 0 * a1, [0.1j * eps, 0.02 * eps], [eps, 0.05 * eps])
    found = with_drive_sweep(pump, upper, lower)
    size, turn = np.abs(a1), np.exp(2j * np.angle(a1))
    expected = {"s22": 0.3 + 0.1 * size, "s21": 10 - 4 * size**2, "s11": 0.2 + 0.1j * size**2, "s12": 0.04j + 0 * size}
    for name, value in expected.items():
        np.testing.assert_allclose(getattr(found.s, name), value, rtol=0, atol=1e-7)
    expected = {"s22": 0.1 * size**2, "s21": -2 * size**2, "s11": 0.05j * size**2, "s12": 0.01 * size**2}
    for name, value in expected.items():
        np.testing.assert_allclose(getattr(found.t, name), value * turn, rtol=0, atol=1e-7)


def test_drives_without_a_slope_are_refused():
    wave = np.ones((3, 5), complex)
    with pytest.raises(DataSetError, match="2 drives give no slope"):
        drive_slope(wave[:2], wave[:2])
    a1 = np.array([[0.5], [1.0], [1.5]]) * np.ones(5)
    for bad in (1.0, 0.5, 0.2):
        broken = a1 + 0j
        broken[1:, 2] = (1.0, bad) if bad < 1 else (1.0, 1.0)
        with pytest.raises(DataSetError, match=r"do not rise \(or fall\) in steps at 2\.3 GHz"):
            drive_slope(broken, wave, frequency_hz=F)


def test_probe_states_that_do_not_suffice_are_refused():
    device = hot_device(np.random.default_rng(6))
    upper, lower = states(device, device, (0, 0, 0.01, 0), (0, 0, 0.02j, 0))
    with pytest.raises(DataSetError, match=r"too alike at 2\.2 GHz"):
        from_probe_states(upper, lower, frequency_hz=F)
    nearly = states(device, device, (0, 0, 0.01, 0), (1e-7, 0, 0.02j, 0))
    with pytest.raises(DataSetError, match=r"too alike at 2\.2 GHz"):
        from_probe_states(*nearly, frequency_hz=F)
    with pytest.raises(DataSetError, match="1 probe states do not solve both ports: two or more"):
        from_probe_states(*(Waves(*(v[:1] for v in w)) for w in (upper, lower)))
    with pytest.raises(DataSetError, match="2 probe states do not solve both ports: four or more"):
        each_sideband(upper, lower)
    nan = upper._replace(b1=np.where(np.arange(5) == 3, np.nan, upper.b1))
    with pytest.raises(DataSetError, match=r"wave is no number at 2\.35 GHz"):
        from_probe_states(nan, lower, frequency_hz=F)
    with pytest.raises(DataSetError, match="image is as strong as the probe"):
        free_of_port_1(upper, upper, *(np.zeros(5, complex) for _ in range(4)))


@pytest.mark.parametrize("share", [2.0, 1e9])
def test_what_does_not_settle_is_refused(share):
    """More probe at port 1 than at port 2, and more pump into port 2 than into port 1; 1e9 runs off the numbers."""
    a1 = np.linspace(0.3, 1.2, 10)[:, None] * np.exp(0.4j * np.ones(2))
    eps = 1e-6 * np.ones(a1.shape)
    pump, upper, lower = sidebands_of(a1, 3 * a1, [1j * eps, 0.02 * eps], [eps / share, 0.05 * eps / share])
    with pytest.raises(DataSetError, match="do not settle at frequency index 0"):
        with_drive_sweep(pump, upper, lower)
