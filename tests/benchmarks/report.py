"""Write every file of a plan, at its own size and side by side with itself, and print seconds and sizes.

    python tests/benchmarks/report.py PLAN [--times 1 3 24] [--browser]

The copies have as many spacecraft, antennas and contacts times over. With ``--browser`` each page is opened in
headless Chromium, and the seconds from the first byte to the drawn page are those that the browser measured itself.
"""

from __future__ import annotations

import argparse
import shutil
import sys
import tempfile
import time
from pathlib import Path

from passplan.report.directory import read_plan, stored_run
from passplan.report.export import KINDS, Wanted, export

sys.path.insert(0, str(Path(__file__).parents[1] / "report"))
from plan_variants import multiplied

FLAGS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--window-size=1280,900",
)
# From the start of the navigation to the end of the first frame after everything has run.
DRAWN = """
const done = arguments[0];
requestAnimationFrame(() => setTimeout(() => done(performance.now() / 1000), 0));
"""
FILTERED = """
const done = arguments[0], field = document.getElementById('f-s'), begun = performance.now();
field.value = '0'; field.dispatchEvent(new Event('change'));
requestAnimationFrame(() => setTimeout(() => done((performance.now() - begun) / 1000), 0));
"""


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("plan", type=Path)
    parser.add_argument("--times", type=int, nargs="+", default=[1, 3, 24])
    parser.add_argument("--browser", action="store_true")
    arguments = parser.parse_args()
    record = read_plan(arguments.plan)
    run = stored_run(arguments.plan, record)
    for times in arguments.times:
        whole, of_whole = multiplied(record, run, times) if times > 1 else (record, run)
        with tempfile.TemporaryDirectory() as folder:
            wanted = Wanted(whole, of_whole, Path(folder))
            laps, began, worked = [], time.perf_counter(), time.process_time()
            for kind in KINDS:
                lap = time.perf_counter()
                export(kind, wanted)
                laps.append(f"{kind} {time.perf_counter() - lap:.2f}")
            total, worked = time.perf_counter() - began, time.process_time() - worked
            page = Path(folder) / "report.html"
            print(
                f"{len(whole.contacts)} contacts: all files {total:.2f} s, CPU {worked:.2f} s ({', '.join(laps)}), "
                f"page {page.stat().st_size / 1e6:.2f} MB"
            )
            if arguments.browser:
                print("  " + in_browser(page))


def in_browser(page: Path) -> str:
    from selenium import webdriver

    options = webdriver.ChromeOptions()
    options.binary_location = shutil.which("chromium") or ""
    with tempfile.TemporaryDirectory() as profile:
        for flag in (*FLAGS, f"--user-data-dir={profile}"):
            options.add_argument(flag)
        driver = webdriver.Chrome(options=options, service=webdriver.ChromeService(shutil.which("chromedriver")))
        try:
            driver.get(page.as_uri())
            drawn = driver.execute_async_script(DRAWN)
            filtered = driver.execute_async_script(FILTERED)
        finally:
            driver.quit()
    return f"in the browser: drawn after {drawn:.2f} s, a filter takes {filtered:.2f} s"


if __name__ == "__main__":
    main()
