"""How well costs of classes come back from noisy times: the figure of the page `costs`.

    python tools/bench/fit_weights.py [--ranks 64] [--classes 4] [--noise 0.02] [--cases 50]

Each case draws what every rank holds (shares of the classes by a Dirichlet distribution, 5,000 to
30,000 cells in all), costs within a factor of 10, and one step with relative noise; costs are
fitted from one partition, then costs and speeds (0.5 to 1.5) from three. Printed: the mean and the
largest relative error of a cost over all cases, the share of costs within two standard errors
(95 % is right), and the mean error of a speed.
"""

from __future__ import annotations

import argparse

import numpy as np

import sfcpart


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    for name, default in (("ranks", 64), ("classes", 4), ("cases", 50), ("seed", 0)):
        parser.add_argument(f"--{name}", type=int, default=default)
    parser.add_argument("--noise", type=float, default=0.02)
    given = parser.parse_args()
    rng = np.random.default_rng(given.seed)
    print("| partitions | mean error of a cost | largest | within 2 s.e. | mean error of a speed |")
    print("|---:|---:|---:|---:|---:|")
    for n_partitions in (1, 3):
        found = [case(rng, given, n_partitions) for _ in range(given.cases)]
        costs, within, speeds = (np.array(column) for column in zip(*found, strict=True))
        told = f"{speeds.mean():.2%}" if n_partitions > 1 else ""
        row = f"{costs.mean():.2%} | {costs.max():.2%} | {within.mean():.0%} | {told}"
        print(f"| {n_partitions} | {row} |")


def case(rng, given, n_partitions: int):
    """Return the errors of the costs, which are within two standard errors, errors of speeds."""
    cost = rng.uniform(1e-7, 1e-6, given.classes)
    speed = rng.uniform(0.5, 1.5, given.ranks) if n_partitions > 1 else np.ones(given.ranks)
    speed /= speed.mean()
    seconds, counts = [], []
    for _ in range(n_partitions):
        share = rng.dirichlet(np.full(given.classes, 0.8), given.ranks)
        count = np.rint(share * rng.uniform(5e3, 3e4, given.ranks)[:, None])
        noise = 1 + given.noise * rng.standard_normal(given.ranks)
        seconds.append(count @ cost / speed * noise)
        counts.append({f"class {k}": column for k, column in enumerate(count.T)})
    fit = sfcpart.fit_weights(seconds, counts)
    fitted = np.ones(given.ranks) if fit.speed is None else fit.speed
    within = np.abs(fit.cost - cost) <= 2 * fit.standard_error
    return np.abs(fit.cost / cost - 1), within, np.abs(fitted / speed - 1)


if __name__ == "__main__":
    main()
