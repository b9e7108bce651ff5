// Ties everything together; runs once a page, on the first layout of the level plot.
const LABELS = {
  level_plot: "Level against frequency. Left and right arrows move the cursor.",
  share_plot: "Share of each mode against frequency. Left and right arrows move the cursor.",
  phasor_plot: "Pressures of the modes at the cursor, head to tail",
  section_plot: "Section of the loudspeaker, moving. Space stops and starts it.",
  gallery_plot: "Mode shapes. Left and right arrows choose a mode, Escape none.",
}
const PLOTS = Object.keys(LABELS)
const viewOf = (model) => Bokeh.index.find_one(model)
const onScreen = (plot) => (viewOf(plot)?.el.getClientRects().length ?? 0) > 0
// Words in the HTML beside the plots are written straight into it: changing a Div's text instead would have Bokeh build
// and lay out much of the page anew. Only where a height changes the plots must take their new places; the browser says so
// by itself, so that nothing is measured, and laid out for it, while words are written.
// The sentence keeps the height it once had, so that the plots do not jump as it turns from one line to two.
const KEEPS_HEIGHT = ["sentence"]
const heights = new ResizeObserver((entries) => {
  for (const { target } of entries) {
    const { model, key, height, width } = target.elastovox
    const now = target.offsetHeight, wide = target.offsetWidth
    Object.assign(target.elastovox, { height: now, width: wide })
    if (KEEPS_HEIGHT.includes(key)) target.style.minHeight = wide === width ? `${now}px` : ""
    if (now !== height) viewOf(model)?.invalidate_layout()
  }
})
const write = (model, key, change) => {
  let element = model.elastovox_words?.[key]
  if (!element?.isConnected) {
    element = viewOf(model)?.shadow_el.querySelector(`[data-word="${key}"]`)
    if (!element) return
    model.elastovox_words = { ...model.elastovox_words, [key]: element }
    element.elastovox = { model, key, height: element.offsetHeight, width: element.offsetWidth }
    heights.observe(element)
  }
  change(element)
}
const setWord = (model, key, text, hidden = false) => write(model, key, (element) => {
  if (element.textContent !== text) element.textContent = text
  if (element.hidden !== hidden) element.hidden = hidden
})
// HTML made by the server, where everything that came from a user was escaped.
const setHtml = (model, key, html) => write(model, key, (element) => {
  if (element.elastovox.html === html) return
  element.elastovox.html = html
  element.innerHTML = html
})

// Bokeh prepares every glyph five times over, four of them for selections and the like, which these plots never have: a
// fifth of the time of a repaint. Those four are told to rest; a browser test sees when Bokeh changes.
const COPIES = ["decimated_glyph", "selection_glyph", "nonselection_glyph", "muted_glyph"]
const WORK = ["set_data", "set_visuals", "after_visuals", "after_lazy_visuals", "map_data"]
// Nor do these plots take colours or widths from style sheets, for which Bokeh asks the browser at every stroke.
const plainInks = (visuals) => {
  for (const visual of visuals ?? []) {
    let holder = Object.getPrototypeOf(visual)
    while (holder && !Object.hasOwn(holder, "_get_css_value")) holder = Object.getPrototypeOf(holder)
    if (holder) holder._get_css_value = () => ""
  }
}
// Words are painted with no more than it takes, all being level, of one line and without outline: Bokeh's own way saves and
// restores the canvas, reads the typeface and strokes an outline for each of a hundred words, half the time of a repaint.
const paintPlainly = (glyph) => {
  if (glyph?.model.type !== "Text" || typeof glyph._paint !== "function" || !glyph.labels || !glyph.anchor_ || !glyph.swidth) return false
  glyph._paint = function (ctx, indices, data) {
    const { labels, anchor_, swidth, sheight } = this, { sx, sy, x_offset, y_offset } = { ...this, ...data }
    ctx.save()
    ctx.textAlign = "left"
    ctx.textBaseline = "alphabetic"
    let font = null
    for (const i of indices) {
      const label = labels[i], anchor = anchor_.get(i)
      const x = sx[i] + x_offset.get(i) - anchor.x * swidth[i], top = sy[i] + y_offset.get(i) - anchor.y * sheight[i]
      if (!label || !Number.isFinite(x + top)) continue
      if (label.risen !== label.font) {
        label.ascent = label._text_line(label._size().metrics).ascent
        label.risen = label.font
      }
      if (font !== label.font) ctx.font = font = label.font
      ctx.fillStyle = label.color
      ctx.fillText(label.text, x, top + label.ascent)
    }
    ctx.restore()
  }
  return true
}
// At every repaint each of them would also write a style sheet of its own for an element in which there is nothing to see,
// and the browser would work out the page's styles and layout anew.
const restPlace = (renderer) => {
  if (typeof renderer.update_position !== "function") return false
  renderer.update_position = () => {}
  return true
}
const restCopies = (view) => {
  const rested = { copies: 0, words: 0, places: 0 }
  plainInks(view.visuals)
  for (const renderer of view.renderer_views.values()) {
    if (restPlace(renderer)) rested.places += 1
    plainInks(renderer.glyph?.visuals)
    if (paintPlainly(renderer.glyph)) rested.words += 1
    for (const name of COPIES) {
      if (!WORK.every((work) => typeof renderer[name]?.[work] === "function")) continue
      for (const work of WORK) renderer[name][work] = () => {}
      rested.copies += 1
    }
  }
  return rested
}

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

// What other pages' scripts share with this one.
const TOOLS = { ACTIONS, ask, onScreen, percent, viewOf, pointed, toNearest, stepCursor, bracket, put, digits, hertz, setHtml, restCopies, textWidth, NUMBERS }

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
