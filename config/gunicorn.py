"""How the web server runs: `make run` and `make start` both use this file; gunicorn finds it by its name."""

from __future__ import annotations

import gc
import os
from typing import Any

wsgi_app = "config.wsgi:application"
bind = os.environ.get("HALFNUT_BIND", "127.0.0.1:8000")
worker_class = "gthread"
workers = int(os.environ.get("HALFNUT_WEB_PROCESSES") or min(4, max(2, os.cpu_count() or 1)))
threads = int(os.environ.get("HALFNUT_WEB_THREADS") or 8)
timeout = 120
graceful_timeout = 20
keepalive = 75  # longer than the idle time of a usual reverse proxy, which then never meets a closed connection
max_requests = 20000
max_requests_jitter = 2000
# The program is read once and the web processes are forked from it: they share its memory, and one that died is back at
# once, with the numerical libraries in it.
preload_app = True
control_socket_disable = True
loglevel = os.environ.get("HALFNUT_LOG_LEVEL", "warning")


def on_starting(server: Any) -> None:
    """Read the numerical libraries before the first page needs them; a fork then has them for nothing."""
    import plotly.graph_objects as graph_objects
    import scipy.optimize
    import scipy.special
    import scipy.stats

    # The first figure reads Plotly's templates from disk.
    graph_objects.Figure(graph_objects.Scatter(x=[0], y=[0])).to_json()
    scipy.optimize.minimize(lambda point: (point**2).sum(), [0.5])
    scipy.special.gammaln(2.0)
    scipy.stats.norm.ppf(0.975)
    # What was read up to here stays for ever: the collector need not touch, and so copy, the pages that forks share.
    gc.collect()
    gc.freeze()
