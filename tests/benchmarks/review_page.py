"""Time the review page in a real browser: first view, click to ring, click to statistics, frames while moving.

    python tests/benchmarks/review_page.py [--rounds N] [--spots 300,5000,20000]

A 12-megapixel photograph, drawn here, with as many spots as said; medians over the rounds. All times
are taken in the page itself: from the browser's time stamp of the event to the frame after the one in
which the change was drawn. Chromium without a GPU (software raster), 1440 x 900. Other work on the
computer has its say in every figure: so the load is printed, the frames of a page at rest beside those
of one in motion, and the processor time of browser and server together (Linux), which others do not
stretch.
"""

from __future__ import annotations

import argparse
import hashlib
import os
import statistics
import sys
import tempfile
from dataclasses import dataclass
from pathlib import Path

import cv2
import numpy as np
from playwright.sync_api import Browser, Page, sync_playwright

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.area import frame_area
from detect.scale import Scale
from detect.sheet import SCHEMA, PhotographIdentity, Sheet, write_sheet
from detect.spots import Spots
from tests.detect.review.browsing import QUIET, Server, browser_path

WIDTH, HEIGHT = 4000, 3000
WATCH = """
() => {
  const times = { view: 0, down: 0, ring: [], place: [], statistics: [], frames: [] };
  window.times = times;
  const next = (act) => requestAnimationFrame(() => requestAnimationFrame(() => act(performance.now())));
  const begin = (stage) => {
    addEventListener("pointerdown", (event) => { times.down = event.timeStamp; times.wait = true; times.kind = ""; }, true);
    let [drawn, placing] = ["", ""];
    new MutationObserver(() => {
      if (stage.dataset.photograph === "shown" && stage.dataset.drawn && !times.view) {
        times.view = -1;
        next((now) => { times.view = now; });
      }
      if (times.wait && placing !== stage.dataset.placing && stage.dataset.placing === "1") {
        times.kind = "place";
        const from = times.down;
        next((now) => times.place.push(now - from));
      } else if (times.wait && drawn !== stage.dataset.drawn && times.kind === "") {
        times.kind = "ring";
        const from = times.down;
        next((now) => times.ring.push(now - from));
      }
      [drawn, placing] = [stage.dataset.drawn, stage.dataset.placing];
    }).observe(stage, { attributes: true });
    const result = document.getElementById("result");
    let busy = true;
    new MutationObserver(() => {
      const now = result.getAttribute("aria-busy") === "true";
      if (busy && !now && times.wait) {
        times.wait = false;
        const from = times.down;
        next((now) => times.statistics.push(now - from));
      }
      busy = now;
    }).observe(result, { attributes: true, attributeFilter: ["aria-busy"] });
  };
  const wait = new MutationObserver(() => {
    const stage = document.getElementById("stage");
    if (!stage || !document.getElementById("result")) return;
    wait.disconnect();
    begin(stage);
  });
  wait.observe(document, { childList: true, subtree: true });
}
"""
FRAMES = """
(on) => {
  if (!on) { window.watching = false; return window.times.frames; }
  window.watching = true;
  window.times.frames = [];
  let last = performance.now();
  const tick = (now) => {
    if (!window.watching) return;
    window.times.frames.push(now - last);
    last = now;
    requestAnimationFrame(tick);
  };
  requestAnimationFrame((now) => { last = now; requestAnimationFrame(tick); });
}
"""
READY = """() => window.times.view > 0 && document.body.dataset.ready === "yes"
  && document.getElementById("result").getAttribute("aria-busy") === "false"
  && document.getElementById("saved").dataset.state === "saved"
  && !Number(document.getElementById("stage").dataset.placing ?? 0)"""


@dataclass(frozen=True)
class Bound:
    """What is asked for, in milliseconds, at how many spots."""

    what: str
    limit: float
    spots: int | None = None


BOUNDS = (
    Bound("first view", 1000, 300),
    Bound("click to struck ring", 60),
    Bound("click to placed ring", 60),
    Bound("click to statistics", 200, 5_000),
    Bound("click to statistics", 350, 20_000),
    Bound("frames while zooming, p95", 25, 20_000),
    Bound("frames while shifting, p95", 25, 20_000),
)


def a_photograph(folder: Path, places: np.ndarray, radius: np.ndarray) -> bytes:
    """Draw light discs on uneven, noisy ground, as a JPEG of a camera's size."""
    rng = np.random.default_rng(3)
    small = rng.normal(110, 18, (HEIGHT // 50, WIDTH // 50, 3)).astype(np.float32)
    ground = cv2.resize(small, (WIDTH, HEIGHT), interpolation=cv2.INTER_CUBIC)
    image = np.clip(ground + rng.normal(0, 5, ground.shape), 0, 255).astype(np.uint8)
    for (x, y), r in zip(places, radius, strict=True):
        cv2.circle(image, (int(x), int(y)), int(r), (190, 220, 230), -1, cv2.LINE_AA)
    data = cv2.imencode(".jpg", image, [cv2.IMWRITE_JPEG_QUALITY, 90])[1].tobytes()
    (folder / "dish.jpg").write_bytes(data)
    return data


def lay(folder: Path, n: int) -> np.ndarray:
    """Draw the photograph and write its sheet; returns where the spots are."""
    folder.mkdir()
    rng = np.random.default_rng(n)
    columns = int(np.ceil(np.sqrt(1.2 * n * WIDTH / HEIGHT)))
    step = WIDTH / (columns + 1)
    cells = [(column, row) for row in range(columns) for column in range(columns)]
    places = np.array([((c + 0.7) * step, (r + 0.7) * step) for c, r in cells])
    # The lowest strip stays empty, so that there is room to place spots.
    places = places[places[:, 1] < HEIGHT - max(step, 160)]
    places = places[np.linspace(0, len(places) - 1, n).astype(int)]
    places = places + rng.uniform(-0.15, 0.15, places.shape) * step
    radius = rng.uniform(0.2, 0.34, len(places)) * min(step, 90)
    data = a_photograph(folder, places, radius)
    size = len(places)
    spots = Spots.found_at(
        places[:, 0],
        places[:, 1],
        radius,
        contrast=np.full(size, 9.0),
        fill=np.ones(size),
        doubt=rng.uniform(0, 0.6, size),
    )
    identity = PhotographIdentity("dish.jpg", hashlib.sha256(data).hexdigest(), WIDTH, HEIGHT, None)
    settings = {"request": {}, "detector": {}, "notes": [], "photograph_at": "dish.jpg"}
    area, scale = frame_area(WIDTH, HEIGHT), Scale.from_mm_per_pixel(0.02)
    write_sheet(Sheet(SCHEMA, "benchmark", identity, scale, area, settings, spots), folder)
    return places


def screen(page: Page, x: float, y: float) -> tuple[float, float]:
    """Return where a place of the photograph is on the screen."""
    bounds = page.locator("#stage").bounding_box()
    assert bounds is not None
    values = [
        float(page.get_attribute("#stage", f"data-{name}") or 0)
        for name in ("scale", "left", "top")
    ]
    return bounds["x"] + (x - values[1]) * values[0], bounds["y"] + (y - values[2]) * values[0]


def moving(page: Page, how: str) -> tuple[float, int]:
    """Zoom, shift, or do nothing for about two seconds; returns 95th percentile and number of frames."""
    x, y = screen(page, WIDTH / 2, HEIGHT / 2)
    page.mouse.move(x, y)
    if how == "shifting":
        page.mouse.down(button="right")
    page.evaluate(FRAMES, True)
    for k in range(110):
        if how == "zooming":
            page.mouse.wheel(0, -40 if (k // 20) % 2 == 0 else 40)
        elif how == "shifting":
            page.mouse.move(x + 150 * np.sin(k / 8), y + 90 * np.cos(k / 9))
        page.wait_for_timeout(8)
    frames = page.evaluate(FRAMES, False)
    if how == "shifting":
        page.mouse.up(button="right")
    return float(np.percentile(frames, 95)), len(frames)


def below(pid: int) -> list[int]:
    """Return a process and all that it started."""
    path = Path(f"/proc/{pid}/task/{pid}/children")
    started = path.read_text(encoding="ascii").split() if path.exists() else []
    return [pid, *(each for child in started for each in below(int(child)))]


def processor_ms() -> dict[int, float]:
    """Return the processor time of each process of browser and server; none where it is not told."""
    spent: dict[int, float] = {}
    for pid in below(os.getpid())[1:]:
        try:
            stat = Path(f"/proc/{pid}/stat").read_text(encoding="ascii", errors="replace")
        except OSError:
            continue
        user, system = stat.rpartition(")")[2].split()[11:13]
        spent[pid] = 1000 * (int(user) + int(system)) / os.sysconf("SC_CLK_TCK")
    return spent


def since(begun: dict[int, float]) -> float:
    """Return the processor time that those still there have spent since."""
    return sum(spent - begun.get(pid, 0.0) for pid, spent in processor_ms().items())


def clicked(page: Page, spots: list[tuple[float, float]]) -> float:
    """Click on places, each time waiting until all is still; returns the processor time of one."""
    begun = processor_ms()
    for spot in spots:
        page.mouse.move(*spot, steps=3)
        page.mouse.click(*spot)
        page.wait_for_function(READY)
    return since(begun) / len(spots)


def one_round(browser: Browser, server: Server, places: np.ndarray, seed: int) -> dict[str, float]:
    """Open the page once, click a few times, and move."""
    context = browser.new_context(viewport={"width": 1440, "height": 900})
    context.add_init_script(f"({WATCH})()")
    page = context.new_page()
    page.set_default_timeout(60_000)
    begun = processor_ms()
    page.goto(server.url)
    page.wait_for_function(READY)
    opened = since(begun)
    rng = np.random.default_rng(seed)
    chosen = places[rng.choice(len(places), 5, replace=False)]
    struck = clicked(page, [screen(page, x, y) for x, y in chosen])
    page.keyboard.press("Escape")
    low, high = (50, HEIGHT - 90), (WIDTH - 50, HEIGHT - 10)
    clicked(page, [screen(page, *rng.uniform(low, high)) for _ in range(5)])
    times = page.evaluate("() => window.times")
    measured = {
        "first view": times["view"],
        "  processor time to open": opened,
        "click to struck ring": statistics.median(times["ring"]),
        "click to placed ring": statistics.median(times["place"]),
        "click to statistics": statistics.median(times["statistics"][:5]),
        "  processor time of a click": struck,
    }
    for how in ("resting", "zooming", "shifting"):
        begun = processor_ms()
        p95, frames = moving(page, how)
        measured[f"frames while {how}, p95"] = p95
        measured[f"  processor time a frame, {how}"] = since(begun) / max(frames, 1)
    context.close()
    return measured


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rounds", type=int, default=5)
    parser.add_argument("--spots", default="300,5000,20000")
    asked = parser.parse_args()
    with sync_playwright() as playwright, tempfile.TemporaryDirectory() as place:
        browser = playwright.chromium.launch(executable_path=browser_path(), args=QUIET)
        for n in (int(each) for each in asked.spots.split(",")):
            folder = Path(place) / str(n)
            places = lay(folder, n)
            server = Server(folder, Path(place) / "state")
            server.start()
            try:
                rounds = [one_round(browser, server, places, seed) for seed in range(asked.rounds)]
            finally:
                server.kill()
            print(
                f"{len(places):,} spots, {asked.rounds} rounds, load {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores"
            )
            for what in rounds[0]:
                values = [each[what] for each in rounds]
                bound = [b for b in BOUNDS if b.what == what and b.spots in (None, n)]
                told = f"  bound {bound[0].limit:.0f}" if bound else ""
                print(
                    f"  {what:36s}{statistics.median(values):7.0f} ms  ({min(values):.0f} to {max(values):.0f}){told}",
                    flush=True,
                )
        browser.close()


if __name__ == "__main__":
    main()
