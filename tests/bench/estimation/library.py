"""Times the general-purpose libraries: reads a name a line, does that work once and prints the seconds it took,
scaled to the whole work where only a part of it is done. Library threads are left as they come."""

import ctypes
import glob
import os
import platform
import sys
import time
import warnings
from pathlib import Path

import arch
import numpy as np
import pandas as pd
import statsmodels
from arch.unitroot import ADF, DFGLS, KPSS, PhillipsPerron, ZivotAndrews
from arch.unitroot.cointegration import DynamicOLS, FullyModifiedOLS
from statsmodels.tsa.ardl import ARDL, UECM, ardl_select_order
from statsmodels.tsa.vector_ar.vecm import coint_johansen

warnings.simplefilter("ignore")
FOLDER = Path(sys.argv[1])
DANISH = pd.read_csv(FOLDER / "danish_money_demand.csv")
US = pd.read_csv(FOLDER / "us_macro_quarterly.csv")
LOGS = np.log(US[["realcons", "realgdp", "realinv", "realgovt", "realdpi"]])
MONEY = DANISH[["lrm", "lry", "ibo", "ide"]].to_numpy()
JOHANSEN_REPEATS = 200
REPLICATIONS, REPLICATIONS_DONE = 1999, 40
AREAS, AREAS_DONE = 150, 1


def describe():
    """Versions; kernel and threads of the linear algebra that numpy brings along."""
    told = "not told"
    found = glob.glob(os.path.join(os.path.dirname(np.__file__), "..", "numpy.libs", "*openblas*"))
    if found:
        library = ctypes.CDLL(found[0])
        kernel = library.scipy_openblas_get_corename64_
        kernel.restype = ctypes.c_char_p
        threads = library.scipy_openblas_get_num_threads64_()
        told = f"OpenBLAS, kernel {kernel().decode()}, {threads} threads"
    return (f"Python {platform.python_version()}, numpy {np.__version__}, statsmodels "
            f"{statsmodels.__version__}, arch {arch.__version__}; linear algebra: {told}")


def ardl_grid():
    y, x = LOGS["realcons"], LOGS.drop(columns="realcons")
    order = ardl_select_order(y, 4, x, 4, trend="c", ic="aic")
    UECM.from_ardl(order.model).fit().bounds_test(3)
    return 1.0


def johansen():
    for _ in range(JOHANSEN_REPEATS):
        coint_johansen(MONEY, 0, 1)
    return 1.0 / JOHANSEN_REPEATS


def ardl_bootstrap():
    """Fixed regressors, residuals drawn by date: the recursion in levels, then the fit of the replicate."""
    y, x = DANISH["lrm"], DANISH[["lry", "ibo"]]
    fit = ARDL(y, 1, x, 1, trend="c").fit()
    b = fit.params.to_numpy()
    residuals = fit.resid.to_numpy() - fit.resid.mean()
    level = x.to_numpy()
    draws = np.random.default_rng(1)
    found = []
    for _ in range(REPLICATIONS_DONE):
        shock = residuals[draws.integers(0, len(residuals), len(residuals))]
        exogenous = (b[0] + b[2] * level[1:, 0] + b[3] * level[:-1, 0]
                     + b[4] * level[1:, 1] + b[5] * level[:-1, 1])
        drawn = np.empty(len(y))
        drawn[0] = y.iloc[0]
        for t in range(1, len(y)):
            drawn[t] = exogenous[t - 1] + b[1] * drawn[t - 1] + shock[t - 1]
        p = ARDL(drawn, 1, x, 1, trend="c").fit().params
        p = np.asarray(p)
        found.append((p[2] + p[3]) / (1 - p[1]))
    np.quantile(found, [0.025, 0.975])
    return REPLICATIONS / REPLICATIONS_DONE


def panel():
    draws = np.random.default_rng(2)
    for _ in range(AREAS_DONE):
        series = np.cumsum(draws.normal(size=(60, 4)), axis=0)
        for y in series.T:
            for trend in ["c", "ct"]:
                ADF(y, trend=trend, method="aic").stat
                PhillipsPerron(y, trend=trend).stat
                KPSS(y, trend=trend).stat
                DFGLS(y, trend=trend, method="aic").stat
            ZivotAndrews(y, trend="c", method="aic").stat
        frame = pd.DataFrame(series, columns=list("yabc"))
        DynamicOLS(frame["y"], frame[["a", "b", "c"]], "c", lags=1, leads=1).fit()
        FullyModifiedOLS(frame["y"], frame[["a", "b", "c"]], "c").fit()
    return AREAS / AREAS_DONE


WORK = {f.__name__: f for f in [ardl_grid, johansen, ardl_bootstrap, panel]}
for line in sys.stdin:
    name = line.strip()
    if name == "describe":
        print(describe(), flush=True)
        continue
    began = time.perf_counter()
    scale = WORK[name]()
    print((time.perf_counter() - began) * scale, flush=True)
