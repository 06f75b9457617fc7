"""Path problems that between them use every kind of reading, stop and payment; names and figures invented."""

from dataclasses import replace

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Branch, Event, Fixing, Leg, Payment, Reading, Remembered, Trigger, When
from pricer.engines.paths.plan import PathProblem
from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from pricer.simulation.common_steps import CommonSteps

RATE = 0.03
CALL = PiecewiseLinear(0.0, 0.0, (1.0,), (1.0,), (0.0,))
PUT = PiecewiseLinear(1.0, -1.0, (1.0,), (1.0,), (0.0,))


def law_of(n=3, m=4, years=2.0, seed=5):
    """Spots 100; volatilities, correlations and drifts depend on time."""
    random = np.random.default_rng(seed)
    times = years * np.arange(1, m + 1) / m
    lengths = np.diff(times, prepend=0.0)
    volatilities = 0.2 + 0.15 * random.random((m, n))
    correlations = [np.full((n, n), r) + (1 - r) * np.eye(n) for r in 0.3 + 0.4 * random.random(m)]
    covariances = np.stack(
        [c * np.outer(v, v) * h for c, v, h in zip(correlations, volatilities, lengths, strict=True)]
    )
    forwards = 100.0 * np.exp(np.outer(times, RATE - 0.03 * random.random(n)))
    return PathLaw(times, forwards, covariances)


def df(law, date):
    return float(np.exp(-RATE * law.times[date]))


def reading(aggregate, since=None):
    n = len(aggregate.weights)
    return Reading(aggregate, (100.0 if since is None else 1.0,) * n, since)


def autocallable(law, aggregate=None, trigger=1.0, step=0.05, coupon=0.06, knock_in=0.65):
    worst = reading(aggregate or Aggregate.worst_of(law.n_assets))
    last = len(law.times) - 1
    terminal = PiecewiseLinear(0.0, 1.0, (knock_in,), (-1.0,), (1.0 - knock_in,))
    events = []
    for date in range(last + 1):
        pays = [
            Payment.fixed(1.0, df(law, date), When.STOPPED_ABOVE),
            Payment(PiecewiseLinear(0.0, 0.0, (0.7,), (0.0,), (coupon,)), df(law, date), When.ALIVE, worst),
        ]
        if date == last:
            pays.append(Payment(terminal, df(law, date), When.SURVIVING, worst))
        events.append(Event(date, above=Trigger(worst, trigger - step * date), payments=tuple(pays)))
    return Leg(tuple(events))


def corridor(law, up, down, payoff=PUT, fixing=None):
    """Stopped on two sides by two readings, with rebates; a payoff at the end."""
    last = len(law.times) - 1
    events = []
    for date in range(last + 1):
        pays = [
            Payment.fixed(0.03, df(law, date), When.STOPPED_ABOVE),
            Payment(PiecewiseLinear(0.05, 0.02), df(law, date), When.STOPPED_BELOW, down),
        ]
        if date == last:
            pays.append(Payment(payoff, df(law, date), When.SURVIVING, fixing or up, averaged=fixing is not None))
        fix = None if fixing is None or date == 0 else Fixing(fixing, 1.0 / last)
        events.append(Event(date, Trigger(up, 1.25), Trigger(down, 0.75), tuple(pays), fix))
    return Leg(tuple(events))


def memory(law):
    """A main leg that a trigger stops, and one branch per coupon that its own level stops too."""
    n = law.n_assets
    worst = reading(Aggregate.worst_of(n))
    legs = [autocallable(law, coupon=0.0)]
    for first in range(len(law.times)):
        events = tuple(
            Event(date, Trigger(worst, 0.8), None, (Payment.fixed(0.02, df(law, date), When.STOPPED_ABOVE),))
            for date in range(first, len(law.times))
        )
        legs.append(Leg(events, branch=Branch(0, first)))
    return tuple(legs)


def remembered(law, below=None):
    """The same coupons on the events of one leg."""
    worst = reading(Aggregate.worst_of(law.n_assets))
    events = [
        replace(e, below=below, coupon=Remembered(Trigger(worst, 0.8), 0.02, df(law, e.date)))
        for e in autocallable(law, coupon=0.0).events
    ]
    return Leg(tuple(events))


def cliquet(law):
    basket = Aggregate.weighted_sum((1.0 / law.n_assets,) * law.n_assets)
    capped = PiecewiseLinear(-1.0, 1.0).limited(-0.02, 0.04)
    stop = Trigger(reading(basket), 1.4)
    events = tuple(
        Event(
            date,
            above=stop,
            payments=(
                Payment(capped, df(law, date), When.ALIVE, reading(basket, since=date - 2 if date > 1 else None)),
            ),
        )
        for date in range(len(law.times))
    )
    return Leg(events)


def forward_start_stop(law):
    """Both the stop and the payment look at performances since the second date."""
    worst = reading(Aggregate.worst_of(law.n_assets), since=1)
    last = len(law.times) - 1
    return Leg(
        (
            Event(last - 1, below=Trigger(worst, 0.9), payments=(Payment.fixed(0.1, 0.97, When.STOPPED_BELOW),)),
            Event(last, Trigger(worst, 1.2), None, (Payment(CALL, df(law, last), When.SURVIVING, worst),)),
        )
    )


def problems():
    law = law_of()
    worst, best = reading(Aggregate.worst_of(3)), reading(Aggregate.best_of(3))
    basket = reading(Aggregate.weighted_sum((0.5, 0.3, 0.2)))
    geometric = reading(Aggregate.geometric((0.5, 0.3, 0.4)))
    second = reading(Aggregate.kth_best(2, 3))
    ranks = reading(Aggregate.rank_weighted((0.6, 0.3, 0.1)))
    one = law_of(n=1)
    return {
        "worst-of autocallable": PathProblem(law, (autocallable(law),)),
        "basket autocallable": PathProblem(law, (autocallable(law, basket.aggregate),)),
        "one asset": PathProblem(one, (autocallable(one),)),
        "worst and best": PathProblem(law, (corridor(law, best, worst),)),
        "second and geometric": PathProblem(law, (corridor(law, second, geometric),)),
        "ranks and basket": PathProblem(law, (corridor(law, ranks, basket),)),
        "crossed": PathProblem(law, (corridor(law, geometric, best, CALL),)),
        "average": PathProblem(law, (corridor(law, best, worst, CALL, basket),)),
        "branches": PathProblem(law, memory(law)),
        "memory": PathProblem(law, (remembered(law),)),
        "memory and a floor": PathProblem(law, (remembered(law, Trigger(best, 0.85)),)),
        "cliquet": PathProblem(law, (cliquet(law),)),
        "forward start": PathProblem(law, (forward_start_stop(law), autocallable(law))),
    }


def sampler_normals(problem, stream, randomisations, points):
    """What the kernel makes of its points: rest (m, n_rest, paths) and common (m, paths) per randomisation."""
    law = problem.law
    lengths = np.diff(law.times, prepend=0.0)
    steps = CommonSteps.of(law.times, law.covariances)
    sizes = steps.sizes
    m, k = len(law.times), len(sizes)
    bridge = Bridge.over(np.concatenate([[0.0], law.times]))
    coordinates = bridge.coordinates(sizes).ravel()
    words = sobol.random_words(stream, randomisations, m * k)
    numbers = sobol.extended_directions(m * k)[coordinates]
    from scipy.special import ndtri

    for w in words:
        z = ndtri((sobol.scrambled_points(numbers, w, 0, points) + 0.5) / 2.0**32).reshape(m, k, points)
        increments = np.diff(bridge.walk(z), axis=0, prepend=0.0) / np.sqrt(lengths)[:, None, None]
        yield increments[:, :-1], increments[:, -1]
