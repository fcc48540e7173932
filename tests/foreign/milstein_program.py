"""Milstein's scheme on dX = mu X dt + sigma X dW, as a program."""

import json
import sys
from types import SimpleNamespace

import numpy as np

pipe = SimpleNamespace(read=sys.stdin.buffer.read)  # NumPy would seek in a file
for line in iter(sys.stdin.buffer.readline, b""):
    run = json.loads(line)
    mu, sigma, h = run["params"]["mu"], run["params"]["sigma"], run["h"]
    x = np.lib.format.read_array(pipe, allow_pickle=False)
    for dw in np.lib.format.read_array(pipe, allow_pickle=False):
        b = sigma * x
        x = x + mu * x * h + b * dw + 0.5 * b * sigma * (dw**2 - h)
    np.save(sys.stdout.buffer, x)
    sys.stdout.buffer.flush()
