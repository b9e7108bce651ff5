"""Page speed, by hand: ``python tests/benchmarks/bench_page.py`` (a minute; needs Chromium and a quiet machine).

Prints, in milliseconds: slider to painted plots for single steps (p50, p95), lag after the last of a burst of 60 inputs a
second, the same on the page of the limits, the first visitor's p50 while a second one drags, and the seconds from the
command to a painted page.
"""

import os
import re
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
from playwright.sync_api import sync_playwright

ROOT = Path(__file__).parent.parent.parent
N_STEPS, N_BURST, REST_MS = 60, 120, 250
CHROMIUM = next(filter(None, map(shutil.which, ("chromium", "chromium-browser", "google-chrome"))), None)
FLAGS = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]

# Moves a slider from inside the page and notes when its level data have been painted (second frame after the change).
HELPERS = """() => {
  const deep = (selector, root = document) => [...root.querySelectorAll(selector), ...[...root.querySelectorAll("*")]
    .filter((host) => host.shadowRoot).flatMap((host) => deep(selector, host.shadowRoot))]
  let source = Bokeh.documents[0].get_model_by_name("level")
  const slider = (key) => deep(`.field-${key} input[type=range]`)[0]
  const move = (node, step) => {
    const to = node.valueAsNumber + step * Number(node.step)
    node.value = to
    node.dispatchEvent(new Event("input", {bubbles: true, composed: true}))
    return to
  }
  const painted = () => new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(() => done(performance.now()))))
  const arrived = () => new Promise((done) => {
    const heard = () => { source.properties.data.change.disconnect(heard); painted().then(done) }
    source.properties.data.change.connect(heard)
  })
  window.bench = {
    listen(name) { source = Bokeh.documents[0].get_model_by_name(name) },
    async step(key, step) {
      const begun = performance.now()
      const shown = arrived()
      move(slider(key), step)
      return await shown - begun
    },
    // inputs a second for so long; the lag from the last input to the last repaint
    async burst(key, count, wait) {
      const node = slider(key)
      let last = 0, seen = 0, repaints = 0
      const heard = () => { repaints += 1; painted().then((now) => { seen = now }) }
      source.properties.data.change.connect(heard)
      for (let i = 0; i < count; i += 1) {
        move(node, i % 40 < 20 ? 1 : -1)
        last = performance.now()
        await new Promise((done) => setTimeout(done, 1000 / 60))
      }
      await new Promise((done) => setTimeout(done, wait))
      source.properties.data.change.disconnect(heard)
      return {lag: seen - last, repaints}
    },
  }
}"""
READY = ("window.Bokeh && Bokeh.documents.length > 0 && Bokeh.documents[0].get_model_by_name('level') "
         "&& Bokeh.documents[0].get_model_by_name('level').data.frequency.length > 10")


def served():
    """The command as a process, and the address it printed."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONUNBUFFERED": "1"}
    process = subprocess.Popen([sys.executable, "-m", "app", "--no-browser"], cwd=ROOT, env=environment, text=True,
                               stdout=subprocess.PIPE)
    said = ""
    while "is at" not in said:
        said = process.stdout.readline()
    return process, re.search(r"http://\S+", said).group()


def opened(browser, url):
    """A visitor's page, painted."""
    page = browser.new_page(viewport={"width": 1440, "height": 900})
    page.goto(url)
    page.wait_for_function(READY)
    page.evaluate("() => new Promise((done) => requestAnimationFrame(() => requestAnimationFrame(done)))")
    return page


def steps(page, key="film-prestretch"):
    """Times of single steps, each from rest, none to a design already computed."""
    times = []
    for i in range(N_STEPS):
        times.append(page.evaluate("([key, step]) => bench.step(key, step)", [key, 1 if i % 80 < 40 else -1.5]))
        page.wait_for_timeout(REST_MS)
    return np.array(times)


def percentiles(times):
    """p50 and p95 as a text."""
    return "p50 {:.0f}, p95 {:.0f}".format(*np.percentile(times, [50, 95]))


def main():
    """Measure and print."""
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        begun = time.perf_counter()
        process, url = served()
        listening = time.perf_counter()
        page = opened(browser, url)
        print(f"command to listening {listening - begun:.1f} s, to the painted page {time.perf_counter() - begun:.1f} s")
        page.evaluate(HELPERS)
        steps(page)
        alone = steps(page, "centre-mass")
        print(f"slider to painted plots, ms: {percentiles(alone)}")
        burst = page.evaluate("([key, count, wait]) => bench.burst(key, count, wait)", ["film-thickness", N_BURST, 2000])
        print(f"burst of {N_BURST} inputs at 60 a second: {burst['repaints']} repaints, lag {burst['lag']:.0f} ms")
        page.locator("button.tab", has_text="Limits").click()
        page.wait_for_function("Bokeh.documents[0].get_model_by_name('limits')?.data.bias_kv.length > 0")
        page.evaluate("bench.listen('limits')")
        print(f"on Limits, ms: bias {percentiles(steps(page, 'drive-bias'))}; "
              f"a new window each time (prestretch) {percentiles(steps(page, 'film-prestretch'))}")
        burst = page.evaluate("([key, count, wait]) => bench.burst(key, count, wait)", ["film-thickness", N_BURST, 2000])
        print(f"burst on Limits: {burst['repaints']} repaints, lag {burst['lag']:.0f} ms")
        page.locator("button.tab", has_text="Response").click()
        page.evaluate("bench.listen('level')")
        beside = steps(page, "film-shear_modulus")
        other = subprocess.Popen([sys.executable, str(Path(__file__).parent / "visitor.py"), url], stdin=subprocess.PIPE,
                                 stdout=subprocess.PIPE, text=True)
        page.wait_for_timeout(3000)
        busy = steps(page, "film-density")
        said, _ = other.communicate()
        print(f"alone, ms: {percentiles(beside)}; while a second visitor drags ({said.strip()}): {percentiles(busy)}; "
              f"ratio of p50 {np.median(busy) / np.median(beside):.2f}")
        process.send_signal(signal.SIGINT)
        process.wait(30)
        browser.close()


if __name__ == "__main__":
    main()
