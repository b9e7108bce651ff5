// Ties everything together; runs once a page, on the first layout of the level plot.
const LABELS = {
  level_plot: "Level against frequency. Left and right arrows move the cursor.",
  share_plot: "Share of each mode against frequency. Left and right arrows move the cursor.",
  phasor_plot: "Pressures of the modes at the cursor, head to tail",
  section_plot: "Section of the loudspeaker, moving. Space stops and starts it.",
  gallery_plot: "Mode shapes. Left and right arrows choose a mode, Escape none.",
}
const PLOTS = Object.keys(LABELS)
// Draws on the next microtask, once however many sources of one message changed: what the cursor moves, or everything.
const redraw = (page, all = true) => {
  page.all ||= all
  if (page.asked) return
  page.asked = true
  queueMicrotask(() => {
    const { m, now, all } = page
    page.asked = page.all = false
    if (!now) return
    page.hidden = !onScreen(m.section_plot)          // another page is shown: these plots are drawn when it is left
    if (!page.hidden) {
      if (all || page.missed) {
        drawRows(page)
        layGallery(page)
        laySection(page)
      }
      drawCursor(page)
      drawPhasor(page)
      setSection(page)
      markGallery(page)
    }
    page.missed = page.hidden && (page.missed || all)
    for (const draw of page.others) draw()
    for (const part of ["strip", "foot", "changes"]) setHtml(m[part], part, m.words.data[part][0] ?? "")
    setWord(m.sentence, "sentence", sentence(now, page.turns, page.f))
    setWord(m.section_menu, "pause", page.playing ? "pause" : "play")
    viewOf(m.buttons)?.shadow_el.querySelector("[data-act=keys]")?.setAttribute("aria-pressed", String(page.keys))
  })
}
const reread = (page) => {
  if (page.stale) return
  page.stale = true
  page.shown = performance.now()
  queueMicrotask(() => {
    page.stale = false
    page.now = read(page.m)
    page.held = read(page.held_m)
    if (!page.now) return
    page.turns = turningPoints(page.now)
    page.f = page.m.cursor.data.frequency[0] ?? page.now.low
    redraw(page)
  })
}

const SENT = ["level", "rows", "motion", "shapes", "nodes", "gallery", "moving", "still"]
const boot = (m) => {
  const held_m = Object.fromEntries(SENT.map((name) => [name, m[`held_${name}`]]))
  const page = { m, held_m, now: null, held: null, turns: { peaks: [], dips: [] }, f: 0, chosen: null, keys: true, pressed: 0,
                 unfolded: false, sheet: 0, pages: 1, tiles: [], phase: 0, moving: null, dressed: new WeakSet(), rested: {}, shown: 0,
                 others: [], own: [], tools: TOOLS, playing: !window.matchMedia("(prefers-reduced-motion: reduce)").matches }
  for (const name of SENT) {
    m[name].connect(m[name].properties.data.change, () => reread(page))
    held_m[name].connect(held_m[name].properties.data.change, () => reread(page))
  }
  const laidOut = () => {
    PLOTS.forEach((name) => dress(page, name))
    setPlaying(page, page.playing)
    redraw(page)
  }
  m.words.connect(m.words.properties.data.change, () => redraw(page, false))
  m.parcel.connect(m.parcel.properties.data.change, () => openParcel(page))
  for (const model of [m.strip, m.foot, m.changes, m.sentence, m.gallery_head, m.buttons, m.section_menu]) {   // their words are lost when they are drawn anew
    model.connect(model.change, () => redraw(page))
  }
  for (const name of PLOTS) {
    const { inner_width, inner_height } = m[name].properties
    m[name].connect(inner_width.change, laidOut)
    m[name].connect(inner_height.change, laidOut)
  }
  page.own = [m.buttons, m.gallery_head, ...["level", "share", "phasor", "section", "gallery"].map((n) => m[`${n}_menu`])]
  new ResizeObserver(() => { if (page.hidden && onScreen(m.section_plot)) redraw(page) }).observe(viewOf(m.section_plot).el)
  document.addEventListener("click", (event) => {
    const path = event.composedPath(), button = path.find((e) => e instanceof HTMLElement && e.dataset.act)
    if (button && page.own.some((model) => path.includes(viewOf(model)?.el))) ACTIONS[button.dataset.act](page, button)
  })
  document.addEventListener("keydown", (event) => onKey(page, event))
  // While a control moves, its result has the browser to itself: the section rests.
  document.addEventListener("input", () => { page.shown = performance.now() }, true)
  // Words measured before their typeface had come are measured again.
  document.fonts.addEventListener("loadingdone", () => {
    for (const model of Object.values(m)) if (model.data && "text" in model.data) model.change.emit()
  })
  reread(page)
  laidOut()
  return page
}
if (!models.level_plot.elastovox) models.level_plot.elastovox = boot(models)
