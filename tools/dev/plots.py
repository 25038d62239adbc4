"""Draws the README's two plots from real runs: tools/dev/plots.py (after a build of the release preset).

A shunt step: the small bench is calibrated against the simulator and its wire trace is read back.
The proof load: `shuntwright demo` records, the file is read with h5py.
"""
import pathlib
import re
import subprocess
import tempfile

import h5py
import numpy as np

ROOT = pathlib.Path(__file__).resolve().parents[2]
BIN = ROOT / "build/release/bin"
WIDTH, HEIGHT, LEFT, RIGHT, TOP, BOTTOM = 860, 320, 70, 20, 34, 46
# Told apart by colour-blind people too (Okabe and Ito); lines are labelled besides.
COLOURS = ["#0072B2", "#D55E00", "#009E73", "#CC79A7"]


def ticks(low, high, count=6):
    step = 10 ** np.floor(np.log10((high - low) / count))
    for factor in (1, 2, 5, 10):
        if (high - low) / (step * factor) <= count:
            step *= factor
            break
    return np.arange(np.ceil(low / step) * step, high + step * 1e-9, step)


def svg(path, title, x_label, y_label, series, spans=()):
    x_low, x_high = min(s[1].min() for s in series), max(s[1].max() for s in series)
    y_low, y_high = min(s[2].min() for s in series), max(s[2].max() for s in series)
    room = 0.06 * (y_high - y_low)
    y_low, y_high = y_low - room, y_high + room
    x = lambda v: LEFT + (v - x_low) / (x_high - x_low) * (WIDTH - LEFT - RIGHT)
    y = lambda v: HEIGHT - BOTTOM - (v - y_low) / (y_high - y_low) * (HEIGHT - TOP - BOTTOM)
    out = [f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {WIDTH} {HEIGHT}" font-family="sans-serif" font-size="12">',
           f'<title>{title}</title><rect width="{WIDTH}" height="{HEIGHT}" fill="#ffffff"/>',
           f'<text x="{LEFT}" y="20" font-size="14" fill="#222">{title}</text>']
    for begin, end, label in spans:
        out.append(f'<rect x="{x(begin):.1f}" y="{TOP}" width="{x(end) - x(begin):.1f}" height="{HEIGHT - TOP - BOTTOM}" fill="#eef2f6"/>')
        out.append(f'<text x="{(x(begin) + x(end)) / 2:.1f}" y="{HEIGHT - BOTTOM - 6}" text-anchor="middle" fill="#555" font-size="10">{label}</text>')
    for v in ticks(y_low, y_high):
        out.append(f'<path d="M{LEFT} {y(v):.1f}H{WIDTH - RIGHT}" stroke="#ddd"/>')
        out.append(f'<text x="{LEFT - 6}" y="{y(v) + 4:.1f}" text-anchor="end" fill="#222">{v:.6g}</text>')
    for v in ticks(x_low, x_high, 10):
        out.append(f'<text x="{x(v):.1f}" y="{HEIGHT - BOTTOM + 16}" text-anchor="middle" fill="#222">{v:.6g}</text>')
    for k, (label, xs, ys) in enumerate(series):
        points = " ".join(f"{x(a):.1f},{y(b):.1f}" for a, b in zip(xs, ys))
        out.append(f'<polyline points="{points}" fill="none" stroke="{COLOURS[k % 4]}" stroke-width="1.3"/>')
        at = int(np.argmax(np.abs(ys - ys[0])))
        if label:
            out.append(f'<text x="{x(xs[at]) + 4:.1f}" y="{y(ys[at]) - 4:.1f}" fill="{COLOURS[k % 4]}">{label}</text>')
    out.append(f'<text x="{(LEFT + WIDTH - RIGHT) / 2}" y="{HEIGHT - 8}" text-anchor="middle" fill="#222">{x_label}</text>')
    out.append(f'<text transform="translate(14 {(TOP + HEIGHT - BOTTOM) / 2}) rotate(-90)" text-anchor="middle" fill="#222">{y_label}</text>')
    path.write_text("\n".join(out + ["</svg>\n"]))


def step_plot(folder):
    rack = ROOT / "profiles/racks/small_bench.toml"
    trace = folder / "bench.trace"
    simulator = subprocess.Popen([BIN / "shuntwright-sim", rack, "--seed", "3"], stdout=subprocess.PIPE, text=True)
    while "ready" not in simulator.stdout.readline():
        pass
    subprocess.run([BIN / "shuntwright", "calibrate", rack, "--isolated", "--channels", "Q3", "--trace", trace],
                   check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, env={"XDG_STATE_HOME": str(folder), "PATH": "/usr/bin"})
    simulator.terminate()
    simulator.wait()
    times, values = [], []
    for line in trace.read_text().splitlines():
        match = re.match(r'\+([\d.]+) amp1 < "(.*)"', line)
        if match:
            for frame in re.findall(r"@[0-9A-F]{4} ([-+\d.]+);", match[2]):
                times.append(float(match[1]))
                values.append(float(frame) / 1000)
    times, values = np.array(times), np.array(values)
    svg(ROOT / "tools/report/step.svg", "Before, shunt, after: channel Q3 of the small bench (simulated), two repeats",
        "time, s", "reading, mV/V", [("", times - times[0], values)])


def load_plot(folder):
    path = folder / "demo.h5"
    subprocess.run([BIN / "shuntwright", "demo", "--seed", "1", "--out", path], check=True, cwd=ROOT,
                   stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    import json
    with h5py.File(path) as f:
        d = f["devices/amp1"]
        n = int(d["rows"][0])
        names = [c.decode() for c in d.attrs["channels"]]
        t = d["time"][:n]
        series = []
        for name in ("S01", "S05", "S09", "S12"):
            values = d["corrected"][:n, names.index(name)].astype(float)
            series.append((name, (t[::20] - t[0]) / 1e9, values[::20]))
        events = [json.loads(line) for line in bytes(f["events"][: int(f["events_bytes"][0])]).decode().splitlines()]
    spans, begin = [], None
    for e in events:
        if e["kind"] == "step begin":
            begin = e
        elif e["kind"] == "step end" and begin:
            spans.append(((begin["unix_ns"] - t[0]) / 1e9, (e["unix_ns"] - t[0]) / 1e9, begin["text"]))
            begin = None
    svg(ROOT / "tools/report/proof_load.svg", "Proof load of the gantry beam (invented, simulated): corrected strain and load steps",
        "time, s", "corrected strain, \u00b5\u03b5", series, spans)


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as name:
        step_plot(pathlib.Path(name))
        load_plot(pathlib.Path(name))
