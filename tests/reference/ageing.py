"""The filter and smoother of the ageing model, computed by a general state-space library (statsmodels).

Reads the JSON a test wrote (first argument), prints JSON: at each moment asked for, filtered and smoothed mean and covariance, and the
log likelihood. Nothing here is taken from the Rust code: the passing of time is discretised by Van Loan's matrix exponential.
"""

import json
import sys

import numpy as np
from scipy.linalg import expm
from statsmodels.tsa.statespace.kalman_smoother import KalmanSmoother


def passage(noise, days):
    """Transition, intercept and noise covariance over `days` (Van Loan, IEEE Trans. Autom. Control 23 (1978))."""
    a = np.zeros((4, 4))
    a[0, 1] = 1.0
    a[1, 1] = -1.0 / noise["tau_days"]
    a[2, 3] = 1.0
    a[3, 3] = -1.0 / noise["slope_tau_days"]
    q = np.diag([noise["q_offset"], noise["q_drift"], noise["q_slope"], noise["q_slope_rate"]])
    block = np.zeros((8, 8))
    block[:4, :4] = -a
    block[:4, 4:] = q
    block[4:, 4:] = a.T
    e = expm(block * days)
    f = e[4:, 4:].T
    return f, np.array([0.0, 0.0, noise["slope_rate"] * days, 0.0]), f @ e[:4, 4:]


def main():
    with open(sys.argv[1], encoding="utf-8") as file:
        given = json.load(file)
    moments = sorted({e["day"] for e in given["events"]} | set(given["ask"]))
    events = {e["day"]: e for e in given["events"]}
    rows = max(len(e["rows"]) for e in given["events"])
    n = len(moments)
    y = np.full((rows, n), np.nan)
    design = np.zeros((rows, 4, n))
    obs_cov = np.repeat(np.eye(rows)[:, :, None], n, axis=2)
    for t, day in enumerate(moments):
        event = events.get(day)
        for i, row in enumerate(event["rows"] if event else []):
            y[i, t] = row["y_mv"]
            design[i, [0, 2], t] = row["h"]
            obs_cov[i, i, t] = row["var_mv2"]
        k = len(event["rows"]) if event else 0
        obs_cov[:k, :k, t] += event["shared_var_mv2"] if event else 0.0
    transition = np.repeat(np.eye(4)[:, :, None], n, axis=2)
    intercept = np.zeros((4, n))
    state_cov = np.zeros((4, 4, n))
    for t in range(n - 1):
        transition[:, :, t], intercept[:, t], state_cov[:, :, t] = passage(given["noise"], moments[t + 1] - moments[t])
    model = KalmanSmoother(k_endog=rows, k_states=4, k_posdef=4)
    model.bind(y.copy(order="F"))
    model["design"] = design
    model["obs_cov"] = obs_cov
    model["transition"] = transition
    model["state_intercept"] = intercept
    model["state_cov"] = state_cov
    model["selection"] = np.eye(4)
    model.initialize_known(np.array(given["start_mean"]), np.array(given["start_cov"]))
    result = model.smooth()
    places = {day: t for t, day in enumerate(moments)}
    answers = [
        {
            "filtered": result.filtered_state[:, t].tolist(),
            "filtered_cov": result.filtered_state_cov[:, :, t].tolist(),
            "smoothed": result.smoothed_state[:, t].tolist(),
            "smoothed_cov": result.smoothed_state_cov[:, :, t].tolist(),
        }
        for t in (places[day] for day in given["ask"])
    ]
    json.dump({"answers": answers, "log_likelihood": float(np.sum(result.llf_obs))}, sys.stdout)


main()
