// Parts of Bokeh that these plots have no use for, put to rest: together they were most of the time of a repaint.
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
