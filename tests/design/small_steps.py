"""An independent simulation: the contract's difference equation around plants integrated by Runge-Kutta."""

import numpy as np


def run(
    plants,
    law,
    *,
    setpoint,
    samples,
    computation_delay=0.0,
    disturbance=0.0,
    low=-np.inf,
    high=np.inf,
    pieces=4,
    input_offset=0.0,
):
    """Step the law of the contract, written out sample by sample, around plants of any order.

    Each sample is cut where the delayed command arrives; both parts take `pieces` steps of the classical
    fourth-order Runge-Kutta method. Returns times, responses (rows between samples too) and commands, a column a plant.
    """
    interval, count = law.update_interval, len(plants)
    order = max(len(p.denominator) - 1 for p in plants)
    a, c = np.zeros((order, count)), np.zeros((order, count))
    for i, plant in enumerate(plants):
        bottom = np.array(plant.denominator, float)
        n = bottom.size - 1
        top = np.concatenate([np.zeros(n + 1), np.array(plant.numerator, float)])[-(n + 1) :] / bottom[0]
        a[:n, i], c[:n, i] = bottom[1:] / bottom[0], top[1:]

    def slope(x, u):
        rate = np.empty_like(x)
        rate[0] = u - (a * x).sum(axis=0)
        rate[1:] = x[:-1]
        return rate

    def advance(x, u, h):
        k1 = slope(x, u)
        k2 = slope(x + 0.5 * h * k1, u)
        k3 = slope(x + 0.5 * h * k2, u)
        k4 = slope(x + h * k3, u)
        return x + h / 6.0 * (k1 + 2.0 * k2 + 2.0 * k3 + k4)

    delay = np.array([p.dead_time for p in plants]) + computation_delay
    whole = np.floor(delay / interval + 1e-9).astype(int)
    part = np.maximum(delay - whole * interval, 0.0)
    x, times, responses = np.zeros((order, count)), [], []
    wanted, sent = np.zeros((samples, count)), np.zeros((samples, count))
    measured, goal = np.zeros((samples, count)), np.broadcast_to(np.asarray(setpoint, float), samples)

    def past(rows, k):
        return rows[k] if k >= 0 else np.zeros(count)

    for k in range(samples):
        measured[k] = (c * x).sum(axis=0)
        v = np.zeros(count)
        for i, r in enumerate(law.setpoint):
            v += r * (goal[k - i] if k >= i else 0.0)
        for i, y in enumerate(law.response):
            v -= y * past(measured, k - i)
        for i in range(1, len(law.command)):
            v += (law.memory[i] - law.command[i]) * past(sent, k - i) - law.memory[i] * past(wanted, k - i)
        wanted[k], sent[k] = v, np.clip(v, low, high)
        index, columns = k - whole, np.arange(count)

        def arriving(j, columns=columns):
            return np.where(j >= 0, sent[np.maximum(j, 0), columns] + disturbance, 0.0) + input_offset

        for length, u in ((part, arriving(index - 1)), (interval - part, arriving(index))):
            for j in range(1, pieces + 1):
                x = advance(x, u, length / pieces)
                offset = 0.0 * part if length is part else part
                times.append(k * interval + offset + length * j / pieces)
                responses.append((c * x).sum(axis=0))
    return np.array(times), np.array(responses), sent
