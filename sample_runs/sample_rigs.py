"""The rigs of the samples. All invented: no such paddle, oven or mirror mount was ever measured.

Each is richer than any model that could be fitted to it: friction, saturation, small lags of drive and sensor, coloured
noise, converter steps, a slow disturbance.
"""

import numpy as np
from true_rig import Sensor, TrueRig
from true_rig.linear_stages import Gain, Integrator, Lag, Resonance, SlowShare
from true_rig.rough_stages import Actuator, Disturbed, FrictionDrive, waves


def paddle(generator: np.random.Generator, plate: float = 1.0) -> TrueRig:
    """A wave-flume paddle on an electric cylinder: drive volts command a speed, a wire sensor measures the position.

    45 mm/s per volt behind a lag of 80 ms, Coulomb friction worth 12 mV, dead time 12 ms; the drive rests at 0.03 V.
    The water sloshes in the flume with periods of a few seconds and pushes with up to about 1 mm/s. A heavier plate
    (its mass over the usual one's) takes longer to get up to speed, and its guides hold it a little more.
    """
    slosh = waves(generator, 0.5, (2.6, 3.9), from_zero=False)
    stages = (
        Actuator(-10.0, 10.0, lag=0.004, rate=1500.0),
        Gain(45.0, balance=0.03),
        FrictionDrive(0.08 * plate, coulomb=0.55 * plate**0.5, breakaway=0.65 * plate**0.5),
        Disturbed(slosh),
        Integrator(),
    )
    sensor = Sensor(lag=0.003, noise=0.05, noise_time=0.01, step=300.0 / 2**14, lowest=0.0, highest=300.0)
    return TrueRig(stages, 0.012, 0.03, 150.0, sensor, 0.001)


def oven(generator: np.random.Generator) -> TrueRig:
    """A curing oven that can only be heated: 1.6 K per per cent of heating, 4.7 min, dead time 24 s, and a slow wall.

    The wall answers with 4 % of the gain and 25 min. The hall's temperature wanders.
    """
    hall = waves(generator, 0.08, (5400.0, 2300.0))
    stages = (
        Actuator(0.0, 100.0, lag=6.0),
        Gain(1.6, balance=45.0, bend=-0.0008),
        Lag(280.0),
        SlowShare(0.04, 1500.0),
        Disturbed(hall),
    )
    sensor = Sensor(lag=3.0, noise=0.08, noise_time=5.0, step=0.02, lowest=0.0, highest=250.0)
    return TrueRig(stages, 24.0, 45.0, 95.0, sensor, 1.0)


def mirror(generator: np.random.Generator, stiffness: float = 1.0) -> TrueRig:
    """A mirror on a flexure, turned by a voice coil: 0.8 mrad/V, 38 Hz, damping ratio 0.04, dead time 0.4 ms.

    Less stiffness lowers the frequency by its root and raises the gain by its inverse. The room's warmth lets it creep.
    """
    creep = waves(generator, 0.001, (9.0, 4.0))
    stages = (
        Actuator(0.0, 10.0, lag=0.0001),
        Gain(0.8 / stiffness, balance=4.0, bend=0.002),
        Resonance(2.0 * np.pi * 38.0 * stiffness**0.5, 0.04),
        Disturbed(creep),
    )
    sensor = Sensor(lag=0.0001, noise=0.004, noise_time=0.0004, step=20.0 / 2**15, lowest=-10.0, highest=10.0)
    return TrueRig(stages, 0.0004, 4.0, 1.5, sensor, 0.0001)
