"""How fast the review's server answers, at 300, 5,000 and 20,000 spots on 12 megapixels.

    python tests/benchmarks/review_server.py

A real server in a process of its own; medians of several requests each, over the wire. What the
browser adds is not in these figures.
"""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from statistics import median

import cv2
import httpx
import numpy as np

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

from detect.area import StudyArea
from detect.scale import Scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet, write_sheet
from detect.spots import Spots

WIDTH, HEIGHT, TIMES = 4000, 3000, 15


def write_folder(folder: Path, n: int) -> None:
    """A photograph of a dish and a sheet of n spots."""
    import shapely

    rng = np.random.default_rng(n)
    picture = np.clip(rng.normal(120, 12, (HEIGHT, WIDTH, 3)), 0, 255).astype(np.uint8)
    picture = cv2.GaussianBlur(picture, (0, 0), 2)
    angle, away = rng.uniform(0, 2 * np.pi, n), 1400 * np.sqrt(rng.uniform(0, 1, n))
    x, y = 2000 + away * np.cos(angle), 1500 + away * np.sin(angle)
    for k in range(n):
        cv2.circle(picture, (int(x[k]), int(y[k])), 5, (220, 230, 210), -1)
    path = folder / "dish.jpg"
    cv2.imwrite(str(path), picture, [cv2.IMWRITE_JPEG_QUALITY, 92])
    identity = PhotographIdentity(
        path.name, hashlib.sha256(path.read_bytes()).hexdigest(), WIDTH, HEIGHT
    )
    area = StudyArea(shapely.Point(2000, 1500).buffer(1420, 180), "dish", "drawn")
    spots = Spots.found_at(x, y, np.full(n, 5.0), doubt=rng.uniform(0, 0.5, n))
    scale = Scale.from_mm_per_pixel(0.03, relative_uncertainty=0.001)
    write_sheet(Sheet(SCHEMA, "t", identity, scale, area, {}, spots), folder)


def timed(ask: object, times: int = TIMES) -> tuple[float, float]:
    """Median and greatest milliseconds of some requests."""
    took = []
    for _ in range(times):
        start = time.perf_counter()
        ask()  # type: ignore[operator]
        took.append(1000 * (time.perf_counter() - start))
    return median(took), max(took)


def measure(n: int) -> None:
    """Print the figures of one number of spots."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        write_folder(folder, n)
        server = subprocess.Popen(
            [sys.executable, "-m", "analyse", "review", name, "--no-open"],
            cwd=ROOT,
            env=os.environ | {"XDG_STATE_HOME": name, "XDG_CACHE_HOME": name},
            stdout=subprocess.PIPE,
            text=True,
        )
        try:
            assert server.stdout is not None
            url = server.stdout.readline().split()[1]
            origin = url[: url.index("/", 8)]
            client = httpx.Client(base_url=url, timeout=60, headers={"origin": origin})
            start = time.perf_counter()
            client.get("")
            client.get("api/session")
            sheet = client.get("api/queue").json()["sheets"][0]["id"]
            base = f"api/sheets/{sheet}"
            client.get(base)
            picture = client.get(f"{base}/picture")
            print(
                f"{n:6d} spots: page, session, queue, sheet and picture"
                f" ({len(picture.content) / 1e6:.1f} MB) {1000 * (time.perf_counter() - start):.0f} ms"
            )
            client.get(f"{base}/panel")
            client.get(f"{base}/fit?x=2000&y=1500")
            made = 0

            def place() -> None:
                nonlocal made
                made += 1
                change = {
                    "id": f"e{made}",
                    "who": "b",
                    "what": "place",
                    "spot": f"n{made}",
                    "x": 1500.5 + made,
                    "y": 1500.5,
                    "radius": 5,
                }
                told = client.post(f"{base}/amendments", json={"amendments": [change]}).json()
                assert told["acknowledged"]

            def place_and_panel() -> None:
                place()
                told = client.get(f"{base}/panel").json()
                assert told["now"]["count"] == n + made - 1000 + TIMES - 10

            def undo() -> None:
                nonlocal made
                change = {"id": f"u{made}", "who": "b", "what": "undo", "of": f"e{made}"}
                told = client.post(f"{base}/amendments", json={"amendments": [change]}).json()
                assert told["acknowledged"]
                made -= 1

            for what, ask in (
                ("sheet", lambda: client.get(base)),
                ("fit", lambda: client.get(f"{base}/fit?x=2000&y=1500")),
                ("an edit saved", place),
                ("an edit undone", undo),
            ):
                middle, most = timed(ask, TIMES if what != "an edit undone" else 10)
                print(f"        {what}: {middle:.0f} ms (at most {most:.0f})")
            made = 1000
            middle, most = timed(place_and_panel)
            print(f"        an edit saved and its statistics: {middle:.0f} ms (at most {most:.0f})")
        finally:
            server.terminate()
            server.wait()


if __name__ == "__main__":
    for number in (300, 5000, 20000):
        measure(number)
