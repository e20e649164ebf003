"""Documents as ``evidence.json`` holds them, with neutral invented values, for the report's tests.

The numbers were made up to look alike a two-pathway law in lockstep, the same decided, and six
rivals over a catalyst. No test treats them as true of anything.
"""

from __future__ import annotations

from typing import Any

import numpy as np

Document = dict[str, Any]


def column(name: str, is_: str, units: str, values: Any, error: str, **more: Any) -> Document:
    base: Document = {
        "name": name,
        "is": is_,
        "units": units,
        "values": [None if v is None else float(v) for v in values],
        "labels": None,
        "sd": None,
        "error": error,
        "origin": "",
        "basis": "stated",
        "declared": True,
    }
    return base | more


def constant(
    name: str, units: str, value: float, se: float | None, ends: Document, **more: Any
) -> Document:
    base: Document = {
        "name": name,
        "units": units,
        "value": value,
        "standard_error": se,
        "at_bound": value == 0,
        "meaning": "",
        "intervals": {k: v[0] for k, v in ends.items()},
        "interval_ends": {k: v[1] for k, v in ends.items()},
        "interval_notes": {},
    }
    return base | more


def mathml(name: str) -> str:
    return f"<mrow><mi>r</mi><mo>=</mo><msub><mi>k</mi><mi>{name}</mi></msub><mi>A</mi></mrow>"


def fitted(labels: list[str], y: Any, predicted: Any, sd: Any, units: str) -> list[Document]:
    return [
        {
            "run": r,
            "column": "rate",
            "observed": float(o),
            "predicted": float(p),
            "low": float(p) * 0.985,
            "high": float(p) * 1.015,
            "residual": float(o - p),
            "standardised": float((o - p) / s),
            "sd": float(s),
            "units": units,
        }
        for r, o, p, s in zip(labels, y, predicted, sd, strict=True)
    ]


def two_amines(*, decided: bool = False) -> Document:
    """Two parallel pathways: in lockstep and undecided, or decided by spread runs."""
    rng = np.random.default_rng(3)
    a = np.array([10.0, 14, 18, 22, 26, 30, 34, 38])
    b = 2.5 * a * (1 + 0.001 * rng.normal(size=8))
    if decided:
        a = np.r_[a, 10, 30, 12, 28]
        b = np.r_[b, 80, 10, 5, 90]
    labels = [str(i + 1) for i in range(len(a))]
    truth = 0.30 * a + (0.055 if decided else 0.04) * b
    sd = 0.01 * truth + 0.02
    y = truth + sd * rng.normal(size=len(a))
    predicted = truth
    lock = (
        []
        if decided
        else [
            {
                "terms": ["k_by_a", "k_by_b"],
                "columns": ["amine_a", "amine_b"],
                "ratio": [2.4961, 2.5043],
                "words": "k_by_a·[A] and k_by_b·[B] move together: [B]/[A] stays between 2.496 and "
                "2.504, a spread of 0.3 %, less than the stated errors of the concentrations.",
            }
        ]
    )
    c, x, o = "crossed", "bound", "open"
    k_a = constant("k_by_a", "s⁻¹", 3.002e-4, 0.031e-4 if decided else 1.9e-4, {
        "linearised": [[2.93e-4, 3.07e-4], [c, c]] if decided else [[-1.5e-4, 7.5e-4], [c, c]],
        "profile": [[2.94e-4, 3.06e-4], [c, c]] if decided else [[0.0, 4.02e-4], [x, c]],
        "reconciled": [[2.93e-4, 3.08e-4], [c, c]] if decided else [[0.0, None], [x, o]],
        "guaranteed": [[2.85e-4, 3.15e-4], [c, c]] if decided else [[0.0, 4.11e-4], [x, c]],
    })  # fmt: skip
    k_b = constant("k_by_b", "s⁻¹", 5.51e-5, 0.09e-5 if decided else 7.6e-5, {
        "linearised": [[5.31e-5, 5.70e-5], [c, c]] if decided else [[-14e-5, 22e-5], [c, c]],
        "profile": [[5.32e-5, 5.69e-5], [c, c]] if decided else [[0.0, 16.1e-5], [x, c]],
        "reconciled": [[5.28e-5, 5.74e-5], [c, c]] if decided else [[0.0, 16.4e-5], [x, c]],
        "guaranteed": [[4.9e-5, 6.1e-5], [c, c]] if decided else [[0.0, 16.9e-5], [x, c]],
    })  # fmt: skip
    two = {
        "name": "two pathways",
        "law": "r = k_by_a*[A] + k_by_b*[B]",
        "law_latex": r"r = k_{by\,a} [A] + k_{by\,b} [B]",
        "law_mathml": mathml("by_a"),
        "step_law": "",
        "combinations": [],
        "assumptions": ["Both steps run side by side and do not share an intermediate."],
        "conventions": ["Mass action: the order in a species is its coefficient in the step."],
        "derivation": [
            {"words": "Each step by mass action.", "text": "r_by_a = k_by_a*[A]", "latex": "",
             "mathml": mathml("by_a")},
            {"words": "The steps make P side by side; their rates add.",
             "text": "r = k_by_a*[A] + k_by_b*[B]", "latex": "", "mathml": ""},
        ],
        "steps": {"by_a": "A -> P", "by_b": "B -> P"},
        "same_law_as": [],
        "place": "study.toml, line 20",
        "status": "converged",
        "n_constants": 2,
        "degrees_of_freedom": len(a) - 2,
        "rss": 0.0123, "objective": 5.31, "fit_p": 0.50, "rank": 2,
        "log_likelihood": -2.65, "aic": 9.31, "aicc": 11.7, "bic": 9.47,
        "weight": 0.41 if not decided else 0.9998,
        "lack_of_fit": None,
        "condition_number": 4.1 if decided else 2410.0,
        "digits_lost": 0.6 if decided else 3.4,
        "condition_indices": [1.0, 4.1 if decided else 2410.0],
        "variance_proportions": [[0.0, 0.0], [1.0, 1.0]],
        "trade_offs": [] if decided else [
            {"singular_value": 0.0006, "direction": {"k_by_a": -2.5, "k_by_b": 1.0},
             "words": "these runs fix only k_by_a + 2.500 k_by_b"}],
        "correlations": {"names": ["k_by_a", "k_by_b"],
                         "matrix": [[1, -0.31 if decided else -0.9999],
                                    [-0.31 if decided else -0.9999, 1]]},
        "constants": [k_a, k_b],
        "outcome": "stands",
        "inseparable_from": [] if decided else ["A alone"],
        "no_better_than": None if decided else "A alone",
        "reasons": ["Q = 5.31 for 6 degrees of freedom (p = 0.50)"],
        "fitted": fitted(labels, y, predicted, sd, "umol/L/s"),
        "pathways": [
            {"name": "by_a", "values": list(0.30 * a), "share": list(0.30 * a / truth)},
            {"name": "by_b", "values": list(truth - 0.30 * a),
             "share": list(1 - 0.30 * a / truth)},
        ],
    }  # fmt: skip
    alone = two | {
        "name": "A alone",
        "law": "r = k_by_a*[A]",
        "law_mathml": mathml("by_a"),
        "steps": {"by_a": "A -> P"},
        "n_constants": 1,
        "degrees_of_freedom": len(a) - 1,
        "objective": 310.0 if decided else 5.36,
        "fit_p": 1e-12 if decided else 0.62,
        "aicc": 312.4 if decided else 8.0,
        "weight": 0.0002 if decided else 0.59,
        "condition_number": 1.0,
        "digits_lost": 0.0,
        "trade_offs": [],
        "constants": [k_a | {"value": 4.002e-4, "standard_error": 0.021e-4}],
        "outcome": "rejected" if decided else "stands",
        "inseparable_from": [] if decided else ["two pathways"],
        "no_better_than": None,
        "reasons": ["Q = 310 for 11 degrees of freedom (p < 0.0001)"] if decided else [],
        "pathways": [],
        "correlations": None,
    }
    question: Document = {
        "asks": "participates",
        "about": "B",
        "verdict": "participates" if decided else "undecided",
        "sentence": "The rate depends on B."
        if decided
        else "These runs cannot tell whether the rate depends on B.",
        "why": ["The test rejects zero in the one candidate that stands (p < 0.0001).",
                "The verdict holds up to 4.2 times the stated errors of the concentrations."]
        if decided
        else ["[B]/[A] stays between 2.496 and 2.504; the two terms of the law are nearly "
              "copies of each other.",
              "Anything from 0 to 100 % of the rate could come from B.",
              "E² explains these runs as well as E·B."],
        "settle": [] if decided else ["Runs at two or more other ratios of [B] to [A]."],
        "reasons": [],
        "undecided_because": [] if decided else ["conditioning"],
        "effect": {"value": 0.31, "low": 0.29 if decided else 0.0, "high": 0.33 if decided else 1.0,
                   "bound": 0.325 if decided else 1.0, "matters_above": 0.05, "at": {},
                   "run": "8", "words": "the largest effect over the runs"},
        "error_margin": 4.2 if decided else None,
        "flip_distance": 6.1 if decided else 0.4,
        "flip_typical": 1.1,
        "tests": {"nested_F": {"p": 1e-9 if decided else 0.41, "statistic": 0.72, "df": [1, 6],
                               "words": "extra sum of squares, conditions taken as exact"},
                  "reconciled": {"p": 1e-8 if decided else 0.44, "z": 5.6 if decided else 0.15,
                                 "words": "reconciled score"}},
        "by_origin": {"set": {"p": 0.44}, "measured": {"p": 0.43}},
        "stand_ins": [] if decided else [
            {"name": "total volume", "words": "total volume in the place of B", "stands": True,
             "p": 0.5}],
        "by_candidate": [
            {"candidate": "two pathways", "stands": True, "contains": True, "p": 0.44,
             "effect": [0.0, 1.0], "votes": "undecided"},
            {"candidate": "A alone", "stands": True, "contains": False, "p": None,
             "effect": [0.0, 0.0], "votes": "negligible"}],
        "detectable": None if decided else 0.96,
    }  # fmt: skip
    stands = {
        "asks": "stands", "about": "all", "verdict": "stands",
        "standing": ["two pathways"] if decided else ["two pathways", "A alone"],
        "rejected": ["A alone"] if decided else [],
        "sentence": "Only “two pathways” stands. These laws are not the only possible ones."
        if decided
        else "Both candidates stand; these runs reject neither. These laws are not the only "
        "possible ones.",
        "why": [], "settle": [],
    }  # fmt: skip
    grid_x, grid_y = np.linspace(0, 4.4e-4, 41), np.linspace(0, 1.8e-4, 41)
    gx, gy = np.meshgrid(grid_x, grid_y)
    weight = 1e10 if not decided else 3e9
    distance = weight * (gx + 2.5 * gy - 4.38e-4) ** 2 * 12
    if decided:
        distance = distance + 2e12 * (gx - 3.0e-4) ** 2
    plane = {
        "candidate": "two pathways",
        "x": {"name": "k_by_a", "units": "s⁻¹"}, "y": {"name": "k_by_b", "units": "s⁻¹"},
        "x_range": [0, 4.4e-4], "y_range": [0, 1.8e-4],
        "bands": [
            {"run": labels[i],
             "line": [[0, yy / (1e3 * bb)], [yy / (1e3 * aa), 0]],
             "low": [[0, (yy - 2 * s) / (1e3 * bb)], [(yy - 2 * s) / (1e3 * aa), 0]],
             "high": [[0, (yy + 2 * s) / (1e3 * bb)], [(yy + 2 * s) / (1e3 * aa), 0]]}
            for i, (aa, bb, yy, s) in enumerate(zip(a, b, y, sd, strict=True))],
        "grid": {"x": list(grid_x), "y": list(grid_y), "distance": distance.tolist()},
        "levels": [2.3, 6.0], "best": [3.0e-4, 5.5e-5],
        "trade_off": None if decided else [[4.3e-4, 0.0], [0.0, 1.74e-4]],
        "corner": None if decided else [[0, 1.69e-4], [4.11e-4, 0], [4.2e-4, 0], [0, 1.74e-4]],
        "words": "",
    }  # fmt: skip
    return base() | {
        "title": "Does the second amine open a pathway of its own?",
        "runs": {
            "n": len(a), "labels": labels, "kept": [True] * len(a), "observation": "rate of P",
            "columns": [
                column("rate", "rate of P", "umol/L/s", y, "1 % + 0.02 umol/L/s", sd=list(sd)),
                column("amine_a", "A", "mmol/L", a, "0.5 %", origin="set", sd=list(0.005 * a)),
                column("amine_b", "B", "mmol/L", b, "digits", origin="measured",
                       sd=[0.003] * len(a), basis="assumed"),
                column("order", "", "", range(len(a)), "", declared=False),
                column("operator", "", "", [None] * len(a), "", declared=False,
                       labels=["north", "south"] * (len(a) // 2)),
            ],
            "replicates": [], "lockstep": lock,
        },
        "candidates": [two, alone],
        "comparisons": [{"smaller": "A alone", "larger": "two pathways", "nested": True,
                         "edge": True, "F": 0.72, "df": [1, 6], "p": 0.43, "p_one_sided": 0.21,
                         "p_reconciled": 0.44, "p_bootstrap": None,
                         "restriction": "k_by_b = 0", "words": "", "p_note": "on the edge"}],
        "questions": [question, stands],
        "planes": [plane],
    }  # fmt: skip


def catalyst() -> Document:
    """Six rivals for a reaction over a catalyst; two cannot be told apart, one did not converge."""
    rng = np.random.default_rng(5)
    n = 24
    pa, pb, pp = (rng.uniform(10, 100, n), rng.uniform(10, 100, n), rng.uniform(0, 30, n))
    truth = 0.5 * 0.02 * pa * 0.01 * pb / (1 + 0.02 * pa + 0.01 * pb) ** 2
    sd = 0.04 * truth
    y = truth + sd * rng.normal(size=n)
    labels = [f"R{i + 1:02d}" for i in range(n)]
    names = ["two adsorbed, one kind of site", "A adsorbed, B from the gas",
             "B adsorbed, A from the gas", "dissociated B", "product on the sites",
             "power law"]  # fmt: skip
    c = "crossed"
    document = base()
    template = two_amines()["candidates"][0]
    candidates = []
    for i, name in enumerate(names):
        off = 1 + 0.02 * i * rng.normal(size=n)
        ends = {k: [[0.8 + i / 10, 1.3 + i / 10], [c, c]]
                for k in ("linearised", "profile", "reconciled")}  # fmt: skip
        ends["guaranteed"] = [[None, None], ["failed", "failed"]]
        candidates.append(template | {
            "name": name,
            "law": "r = k*K_A*K_B*[A]*[B]/(1 + K_A*[A] + K_B*[B])^2",
            "step_law": "r = k_surface*K_ads_A*K_ads_B*[A]*[B]/(1 + K_ads_A*[A] + K_ads_B*[B])^2",
            "combinations": [{"name": "k", "definition": "k_surface*K_ads_A", "words":
                              "only their product occurs", "definition_latex": ""}],
            "steps": {"ads_A": "A + * <=> A*", "ads_B": "B + * <=> B*",
                      "surface": "A* + B* -> P + 2 *"},
            "status": "converged" if i < 5 else "evaluation limit reached",
            "n_constants": 3, "degrees_of_freedom": n - 3, "objective": 20.0 + 15 * i,
            "fit_p": [0.5, 0.45, 0.01, 1e-4, 0.3, None][i],
            "aicc": 27.0 + 15 * i if i < 5 else None,
            "weight": [0.6, 0.39, 0.005, 0.0, 0.005, None][i],
            "condition_number": 40.0 * (i + 1), "digits_lost": 1.6,
            "condition_indices": [1, 8, 40.0 * (i + 1)],
            "lack_of_fit": {"F": 1.2, "df": [5, 16], "p": 0.35},
            "constants": [constant("k", "mol/(kg s)", 0.5, 0.04, ends),
                          constant("K_A", "1/kPa", 0.0201, 0.0021, ends),
                          constant("K_B", "1/kPa", 0.0, None, ends)],
            "outcome": ["stands", "stands", "rejected", "rejected", "stands", ""][i],
            "inseparable_from": [[names[1]], [names[0]], [], [], [], []][i],
            "no_better_than": names[0] if i == 4 else None,
            "same_law_as": [], "trade_offs": [], "correlations": None,
            "pathways": [], "reasons": ["Q = 50 for 21 degrees of freedom (p = 0.01)"]
            if i in (2, 3) else [],
            "fitted": fitted(labels, y, truth * off, sd, "mol/(kg s)") if i < 5 else [],
        })  # fmt: skip
    return document | {
        "title": "Which species must be adsorbed?",
        "runs": {
            "n": n, "labels": labels, "kept": [i != 6 for i in range(n)],
            "observation": "rate of P",
            "columns": [
                column("rate", "rate of P", "mol/(kg s)", y, "4 %", sd=list(sd)),
                column("p_a", "A", "kPa", pa, "1 %", origin="measured"),
                column("p_b", "B", "kPa", pb, "1 %", origin="not stated"),
                column("p_p", "P", "kPa", pp, "1 %", basis="assumed", origin="not stated"),
                column("age", "time on stream", "h", range(n), "", basis="exact"),
            ],
            "replicates": [["R01", "R02"], ["R11", "R12", "R13"]], "lockstep": [],
        },
        "candidates": candidates,
        "comparisons": [{"smaller": names[0], "larger": names[4], "nested": True, "edge": True,
                         "F": 0.2, "df": [1, 20], "p": 0.66, "p_one_sided": 0.33,
                         "p_reconciled": 0.4, "p_bootstrap": None, "restriction": "K_P = 0"}],
        "questions": [
            {"asks": "stands", "about": "all", "verdict": "stands",
             "standing": [names[0], names[1], names[4]], "rejected": [names[2], names[3]],
             "sentence": "Three of six candidates stand; two of them cannot be told apart by "
             "rates. These laws are not the only possible ones.",
             "why": ["“A adsorbed, B from the gas” predicts the same rates within the errors."],
             "settle": ["Not a rate: isotope effect, labelling or spectroscopy of the surface."]},
            {"asks": "participates", "about": "P", "verdict": "negligible",
             "sentence": "No dependence of the rate on P above 5 % within these runs. P may still "
             "be consumed, enter after the limiting step, or be at saturation; rates cannot show "
             "that.", "why": ["The upper bound of the effect is 3.1 %."], "settle": [],
             "effect": {"value": -0.004, "low": -0.02, "high": 0.031, "bound": 0.031,
                        "matters_above": 0.05}},
        ],
        "planes": [],
    }  # fmt: skip


def base() -> Document:
    return {
        "format": 1, "title": "", "confidence": 0.95, "seed": 1,
        "provenance": {"discrim": "0.1.0", "python": "3.11", "numpy": "2", "scipy": "1",
                       "table_sha256": "ab" * 32, "study_sha256": "cd" * 32},
        "study": {
            "file": "study.toml", "reactor": "rates",
            "controls": [{"name": "transport", "done": "two stirring speeds, same rate in 3 %"}],
            "not_checked": ["blank", "mass balance"],
            "other_evidence": [{"says": "label found in the acid", "source": "notebook 12, p. 40",
                                "against": ["A alone"]}],
            "exclusions": [{"where": "run 3", "reason": "valve not flushed", "runs": ["3"]}],
            "derived": [{"name": "A-", "text": "C_tot/(1 + 10^(pKa - pH))"}],
            "settings": {"confidence level": "0.95"},
            "known_constants": [{"name": "pKa", "value": 4.62, "sd": 0.02, "units": "1",
                                 "how": "known with its uncertainty"}],
        },
        "runs": {}, "candidates": [], "comparisons": [], "questions": [], "planes": [],
        "cautions": [
            "The verdict concerns these runs, these candidates and the stated errors; it is not "
            "permission to change a process.",
            "A rate law is not a basis for relief sizing or for scale-up of heat removal.",
        ],
        "findings": [{"severity": "warning", "where": "amine_b",
                      "says": "The error was assumed; the verdict holds up to 1 %."},
                     {"severity": "note", "where": "", "says": "No blank run."}],
        "not_checked": ["Transport limits of heat and mass."],
        "references": [{"method": "Reconciled score test",
                        "source": "Kleibergen, Econometrica 73 (2005) 1103"}],
    }  # fmt: skip


#: Every document of this file, by name.
ALL = {
    "lockstep": lambda: two_amines(),
    "decided": lambda: two_amines(decided=True),
    "catalyst": catalyst,
    "empty": lambda: {"format": 1},
    "bare": base,
}
