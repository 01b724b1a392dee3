"""Done once a process: import everything heavy, then tell the collector to leave it alone.

After every run of a page the server collects garbage; with these packages loaded that took about 60 ms a run until they
were frozen.
"""

from __future__ import annotations

import gc

import altair as alt
import numpy as np
import pandas as pd
import pyarrow as pa

from bedplan import charts, data, decision, export, models, plan

LOADED = (alt, np, pd, pa, charts, data, decision, export, models, plan)

gc.collect()
gc.freeze()
