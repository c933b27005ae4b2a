"""Three changes to today's van plan: loads were called off, and drivers like what they know.

Vans carry cheese between five towns; a node is a town at an hour, and a van waits there or drives
on. Yesterday's best plan is in force. With some loads called off, and a toll on the bridge, it is
not the best one any more, but nobody wants to tell every driver something new: three changes are
allowed.
"""

import pyomo.environ as pyo
from pyomo.contrib.solver.common.factory import SolverFactory

import pyomo_latpath as latpath

TOWNS = ("Marktau", "Hochalp", "Steinried", "Lauterbach", "Ennsegg")
HOURS = range(6, 19)
#: Hours of driving; all roads go both ways.
ROADS = {
    ("Marktau", "Hochalp"): 2,
    ("Marktau", "Steinried"): 1,
    ("Marktau", "Lauterbach"): 1,
    ("Hochalp", "Steinried"): 1,
    ("Steinried", "Lauterbach"): 1,
    ("Steinried", "Ennsegg"): 2,
    ("Lauterbach", "Ennsegg"): 1,
}
#: Loads to be fetched: from, to, not before, vans needed.
ORDERS = (
    ("Hochalp", "Steinried", 7, 2),
    ("Hochalp", "Marktau", 12, 1),
    ("Hochalp", "Steinried", 15, 1),
    ("Steinried", "Marktau", 8, 2),
    ("Steinried", "Hochalp", 10, 1),
    ("Steinried", "Ennsegg", 13, 1),
    ("Ennsegg", "Lauterbach", 9, 2),
    ("Ennsegg", "Steinried", 15, 1),
    ("Ennsegg", "Lauterbach", 12, 1),
    ("Lauterbach", "Marktau", 11, 3),
    ("Lauterbach", "Steinried", 16, 2),
    ("Lauterbach", "Ennsegg", 7, 1),
    ("Marktau", "Lauterbach", 14, 2),
    ("Marktau", "Hochalp", 9, 1),
    ("Marktau", "Steinried", 15, 2),
    ("Marktau", "Steinried", 11, 1),
)
CALLED_OFF = (
    ("Lauterbach", "Marktau", 11),
    ("Lauterbach", "Ennsegg", 7),
    ("Marktau", "Steinried", 15),
    ("Marktau", "Hochalp", 9),
    ("Steinried", "Hochalp", 10),
    ("Ennsegg", "Lauterbach", 12),
)


def build() -> pyo.ConcreteModel:
    """Return the flow of vans through towns and hours; its prices can be changed."""
    drives = [
        (a, h, b, h + hours)
        for (one, other), hours in ROADS.items()
        for a, b in ((one, other), (other, one))
        for h in HOURS
        if h + hours in HOURS
    ]
    waits = [(town, h, town, h + 1) for town in TOWNS for h in HOURS[:-1]]
    nights = [(town, HOURS[-1], town, HOURS[0]) for town in TOWNS]
    needed = {(a, h, b): vans for a, b, h, vans in ORDERS}
    model = pyo.ConcreteModel(name="few changes")
    model.legs = pyo.Set(initialize=drives + waits + nights, dimen=4)
    model.vans = pyo.Var(
        model.legs,
        domain=pyo.NonNegativeIntegers,
        bounds=lambda m, a, h, b, k: (needed.get((a, h, b), 0), 8),
    )
    model.price = pyo.Param(
        model.legs,
        mutable=True,
        initialize=lambda m, a, h, b, k: 40 if k < h else 1 if a == b else 9 * (k - h),
    )
    model.balance = pyo.Constraint(
        TOWNS,
        HOURS,
        rule=lambda m, town, hour: (
            pyo.quicksum(m.vans[leg] for leg in m.legs if leg[2:] == (town, hour))
            == pyo.quicksum(m.vans[leg] for leg in m.legs if leg[:2] == (town, hour))
        ),
    )
    model.cost = pyo.Objective(
        expr=pyo.quicksum(model.price[leg] * model.vans[leg] for leg in model.legs)
    )
    return model


def in_words(leg: tuple, before: float, after: float) -> str:
    """One line about one leg of a move; waiting is what is left between drives."""
    town, hour, to, arrival = leg
    what = f"{hour:2}:00 {town} to {to}" if arrival > hour else f"overnight in {town}"
    more = "more" if after > before else "fewer"
    return f"    {what}: {abs(after - before):.0f} {more} (now {after:.0f})"


def main() -> None:
    """Put yesterday's plan in force, call loads off, and ask for three changes."""
    model = build()
    solver = SolverFactory("latpath")
    solver.solve(model)
    print(f"yesterday's plan cost {pyo.value(model.cost):.0f}")
    for leg in model.legs:
        if {leg[0], leg[2]} == {"Marktau", "Lauterbach"}:
            model.price[leg] = model.price[leg].value + 5  # the toll
        if (leg[0], leg[2], leg[1]) in CALLED_OFF:
            model.vans[leg].setlb(0)
    print(
        f"with the toll it costs {pyo.value(model.cost):.0f}, and {len(CALLED_OFF)} loads are off"
    )
    today = {model.vans[leg].name: model.vans[leg].value for leg in model.legs}
    legs = {model.vans[leg].name: leg for leg in model.legs}

    results = solver.solve(model, warmstart=True, max_moves=3)
    report = results.extra_info.route_report
    for number, move in enumerate(report["moves"], 1):
        print(f"change {number} saves {move['gain']:.0f}:")
        changed = zip(move["columns"], move["before"], move["after"], strict=True)
        for name, before, after in sorted(changed, key=lambda change: legs[change[0]][1]):
            if legs[name][0] != legs[name][2] or legs[name][3] < legs[name][1]:
                print(in_words(legs[name], before, after))
    print(f"then the plan costs {pyo.value(model.cost):.0f}")
    left = sum(move["gain"] for move in report["further_moves"])
    print(f"changes left out: {len(report['further_moves'])}, worth {left:.0f}")

    print("\nwhat leaving a leg as it is would have to be worth, for each plan to be the best:")
    print(latpath.stay_or_change(model, today).to_text())


if __name__ == "__main__":
    main()
