"""The kinds of fleets on which forecasts are tried: those that were asked for, and mixtures and corners beside them."""

from __future__ import annotations

from tests.benchmarks.calibration_fleets import Case

CASES: dict[str, Case] = {
    "many, young": Case(shape=2.5, scale=90.0, deployed=(10, 100)),
    "many, mature": Case(shape=2.0, scale=80.0, deployed=(300, 600)),
    "5 to 15 failures": Case(
        shape=(1.2, 3.0), scale=(150.0, 500.0), sites=8, positions=12, deployed=(10, 150), keep=lambda n: 5 <= n <= 15
    ),
    "two to three lives": Case(shape=2.0, scale=40.0, deployed=(30, 200)),
    "sites differ 0.3": Case(shape=2.0, scale=100.0, spread=0.3, deployed=(10, 200)),
    "sites differ 1": Case(shape=2.0, scale=100.0, spread=1.0, deployed=(10, 200)),
    "late records": Case(shape=2.0, scale=100.0, deployed=(150, 400), records_from=60.0),
    "visits every 14 days": Case(shape=2.0, scale=80.0, deployed=(30, 200), visits=14.0),
    "visits every 28 days": Case(shape=2.0, scale=80.0, deployed=(30, 200), visits=28.0),
    "removed with others": Case(shape=2.0, scale=100.0, deployed=(30, 250), other_removals=1 / 120),
    "planned replacement": Case(shape=2.5, scale=100.0, deployed=(30, 250), replace_at=80.0),
    "duty 20 %": Case(shape=2.0, scale=100.0, deployed=(30, 200), duty_spread=0.2, past_duty=(0.6, 1.6)),
    "lognormal lives": Case(scale=80.0, deployed=(30, 250), family="lognormal"),
    "infants 10 %": Case(shape=2.5, scale=100.0, deployed=(30, 200), infants=0.1),
    "exponential, few": Case(
        shape=1.0, scale=(400.0, 1500.0), sites=8, positions=12, deployed=(10, 200), keep=lambda n: 5 <= n <= 15
    ),
    "0 to 2 failures": Case(
        shape=(1.2, 3.0), scale=(200.0, 1200.0), sites=6, positions=10, deployed=(10, 150), keep=lambda n: n <= 2
    ),
    **{
        f"3 to 7 failures, shape {shape}": Case(
            shape=shape, scale=(120.0, 400.0), sites=6, positions=12, deployed=(10, 120), keep=lambda n: 3 <= n <= 7
        )
        for shape in (1.8, 2.5, 3.5)
    },
}

# Mixtures and corners that no case above was made for: what holds there holds by method, not by chance.
FURTHER: dict[str, Case] = {
    "sites differ 0.5, 5 to 15 failures": Case(
        shape=(1.2, 3.0),
        scale=(150.0, 500.0),
        spread=0.5,
        sites=8,
        positions=12,
        deployed=(10, 150),
        keep=lambda n: 5 <= n <= 15,
    ),
    "late records, removals, sites differ": Case(
        shape=2.2, scale=90.0, spread=0.4, deployed=(150, 500), records_from=90.0, other_removals=1 / 200
    ),
    "visits and planned replacement": Case(shape=2.5, scale=90.0, deployed=(30, 250), visits=21.0, replace_at=84.0),
    "short lives, removals, sites differ": Case(
        shape=1.8, scale=45.0, spread=0.3, deployed=(20, 160), other_removals=1 / 90
    ),
    "lognormal, 8 to 25 failures": Case(
        scale=200.0, sites=8, positions=12, deployed=(10, 160), family="lognormal", keep=lambda n: 8 <= n <= 25
    ),
    "infants 15 %, 15 to 40 failures": Case(
        shape=3.0, scale=250.0, sites=8, positions=15, deployed=(20, 200), infants=0.15, keep=lambda n: 15 <= n <= 40
    ),
    "quarter of 30 days, young": Case(shape=2.5, scale=90.0, deployed=(10, 100), horizon=30.0),
    "180 days, mature": Case(shape=2.0, scale=120.0, deployed=(60, 400), horizon=180.0),
    "one site holds half": Case(shape=2.2, scale=110.0, spread=0.3, sites=7, large_site=112, deployed=(30, 250)),
    "sites of 2 to 60 positions": Case(shape=2.0, scale=110.0, spread=0.4, sizes=(2.0, 60.0), deployed=(20, 250)),
    "large new site, 3 to 15 old failures": Case(
        shape=(1.3, 3.0),
        scale=(150.0, 400.0),
        sites=5,
        positions=12,
        new_positions=120,
        deployed=(10, 150),
        keep=lambda n: 3 <= n <= 15,
    ),
    "shape 1.2, long lives": Case(
        shape=1.2, scale=(400.0, 1200.0), sites=10, positions=20, deployed=(30, 400), keep=lambda n: n >= 10
    ),
    "half of a mature fleet new": Case(shape=2.5, scale=100.0, deployed=(200, 500), young_share=0.5),
    "gamma lives": Case(family="gamma", scale=100.0, deployed=(30, 250)),
    "gamma lives, young": Case(family="gamma", scale=150.0, deployed=(10, 100)),
    "log-logistic lives": Case(family="log-logistic", scale=90.0, deployed=(30, 250)),
    "log-logistic, 10 to 40 failures": Case(
        family="log-logistic", scale=200.0, sites=8, positions=15, deployed=(10, 150), keep=lambda n: 10 <= n <= 40
    ),
    "bad positions 0.5": Case(shape=2.2, scale=100.0, position_spread=0.5, deployed=(30, 300)),
    "bad positions 0.5, young": Case(shape=2.2, scale=110.0, position_spread=0.5, deployed=(10, 120)),
    "infants 8 %, mean 4 days, sites differ": Case(
        shape=2.5, scale=110.0, spread=0.3, infants=0.08, infant_mean=4.0, deployed=(30, 250)
    ),
    "falling hazard": Case(shape=0.75, scale=150.0, deployed=(30, 300)),
    "two old sites, unequal duty": Case(
        shape=2.0, scale=120.0, sites=2, positions=60, deployed=(30, 250), duty_spread=0.15, past_duty=(0.5, 2.0)
    ),
}
