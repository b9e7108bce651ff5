// The one cursor: pointer and keys move it, everything that shows it is drawn anew.
const moveCursor = (page, f) => {
  const { now, m } = page
  if (!now || !Number.isFinite(f)) return
  page.f = Math.min(Math.max(f, now.low, now.frequency[0]), now.high, now.frequency[now.n - 1])
  m.cursor.data = { frequency: [page.f] }
  redraw(page, false)
}
const toNearest = (page, f) => moveCursor(page, page.now.frequency[nearest(page.now, f)])

// One grid point, or as many as make up a pixel.
const stepCursor = (page, direction, pixels = 1) => {
  const { now, m, f } = page
  const range = m.level_plot.x_range
  const target = f * 10 ** (direction * pixels * (range.end - range.start) / Math.max(m.level_plot.inner_width, 1))
  const from = nearest(now, f), to = nearest(now, target)
  moveCursor(page, now.frequency[Math.min(Math.max(to === from ? from + direction : to, 0), now.n - 1)])
}
// The next of the given grid points to the right (or left), round the ends.
const jump = (page, points, direction = 1) => {
  const { now, f } = page
  if (!points.length) return
  const sorted = direction > 0 ? points : [...points].reverse()
  const next = sorted.find((i) => direction * (now.frequency[i] - f) > 1e-6 * f)
  moveCursor(page, now.frequency[next ?? sorted[0]])
}

const ACTIONS = {
  "next-peak": (page) => jump(page, page.turns.peaks),
  "previous-peak": (page) => jump(page, page.turns.peaks, -1),
  "next-dip": (page) => jump(page, page.turns.dips),
  "keys": (page) => {
    page.keys = !page.keys
    redraw(page, false)
  },
  "pause": (page) => setPlaying(page, !page.playing),
  "fold": (page) => {
    page.unfolded = !page.unfolded
    page.sheet = 0
    redraw(page)
  },
  "next-sheet": (page) => turnSheet(page, 1),
  "previous-sheet": (page) => turnSheet(page, -1),
  "save": (page, button) => save(page, button.dataset.plot, button.dataset.form),
}
const turnSheet = (page, step) => {
  page.sheet = (page.sheet + step + page.pages) % page.pages
  redraw(page)
}
const setPlaying = (page, playing) => {
  page.playing = playing
  redraw(page, false)
  if (playing) animate(page)
}

const SINGLE_KEYS = { n: "next-peak", p: "previous-peak", d: "next-dip" }
const SIDEWAYS = { ArrowRight: 1, ArrowLeft: -1 }
// One tab stop a group of buttons: the one last entered.
const enter = (buttons, entered) => {
  buttons.forEach((button) => { button.tabIndex = button === entered ? 0 : -1 })
  entered.focus()
}
const typing = (element) => element instanceof HTMLElement && (element.isContentEditable ||
  element.matches("textarea, select, input:not([type=range]):not([type=checkbox]):not([type=radio]):not([type=button])"))

const onKey = (page, event) => {
  if (event.ctrlKey || event.metaKey || event.altKey || !page.now) return
  const path = event.composedPath()
  if (typing(path[0])) return
  const focused = (name) => path.includes(viewOf(page.m[name])?.el)
  const done = () => event.preventDefault()
  if (focused("level_plot") || focused("share_plot")) {
    const pixels = event.shiftKey ? 20 : 1
    if (event.key === "ArrowRight") return done(stepCursor(page, 1, pixels))
    if (event.key === "ArrowLeft") return done(stepCursor(page, -1, pixels))
    if (event.key === "Home") return done(moveCursor(page, page.now.low))
    if (event.key === "End") return done(moveCursor(page, page.now.high))
  }
  if (focused("gallery_plot")) {
    if (event.key === "ArrowRight") return done(stepChoice(page, 1))
    if (event.key === "ArrowLeft") return done(stepChoice(page, -1))
    if (event.key === "Escape") return done(choose(page, null))
  }
  const bar = path.find((e) => e instanceof HTMLElement && e.classList.contains("bar"))
  if (bar && path[0].matches("button") && event.key in SIDEWAYS) {
    const buttons = [...bar.querySelectorAll("button:not([hidden])")]
    return done(enter(buttons, buttons.at((buttons.indexOf(path[0]) + SIDEWAYS[event.key]) % buttons.length)))
  }
  if (focused("section_plot") && event.key === " ") return done(setPlaying(page, !page.playing))
  if (!page.keys || event.shiftKey || event.key.length !== 1) return
  if (event.key in SINGLE_KEYS) return done(ACTIONS[SINGLE_KEYS[event.key]](page))
  page.pressed += 1
  page.m.pressed.data = { key: [event.key], count: [page.pressed] }
}

// Frequency under a pointer in a plot, or the row if it is left of the map; null outside.
const pointed = (plot, event) => {
  const view = viewOf(plot), box = view.frame.bbox, outer = view.el.getBoundingClientRect()
  const zoom = outer.width / view.bbox.width
  const x = (event.clientX - outer.left) / zoom - box.left, y = (event.clientY - outer.top) / zoom - box.top
  return { x, y: box.height - y, part: x / box.width, height: box.height }
}
const dress = (page, name) => {
  const plot = page.m[name], view = viewOf(plot)
  if (!view || page.dressed.has(view.el)) return
  page.dressed.add(view.el)
  for (const [part, count] of Object.entries(restCopies(view))) page.rested[part] = (page.rested[part] ?? 0) + count
  view.el.tabIndex = 0
  view.el.setAttribute("role", name === "section_plot" || name === "phasor_plot" ? "img" : "application")
  view.el.setAttribute("aria-label", LABELS[name])
  if (name === "gallery_plot") {
    view.el.style.cursor = "pointer"
    view.el.addEventListener("click", (event) => {
      const at = pointed(plot, event)
      clickGallery(page, at.x, at.y)
    })
  }
  if (name !== "level_plot" && name !== "share_plot") return
  const move = (event) => {
    const at = pointed(plot, event), { start, end } = plot.x_range
    if (page.now) toNearest(page, 10 ** (start + Math.min(Math.max(at.part, 0), 1) * (end - start)))
  }
  view.el.style.cursor = "crosshair"
  view.el.addEventListener("pointerdown", (event) => {
    if (event.button !== 0 || !page.now) return
    const at = pointed(plot, event)
    if (name === "share_plot" && at.x < 0) {
      const row = Math.floor((1 - at.y / at.height) * page.now.n_rows)
      if (row >= 0 && row < page.now.n_shown) choose(page, page.now.modes[row])
      return
    }
    view.el.setPointerCapture(event.pointerId)
    move(event)
  })
  view.el.addEventListener("pointermove", (event) => {
    if (view.el.hasPointerCapture(event.pointerId)) move(event)
  })
}
