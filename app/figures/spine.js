// Row labels of the share map, the chosen row, the cursor line and its reading.
const ROW_TEXT = 8.5, ROW_TEXT_MOST = 11         // px; digits are lower than their size, so rows may be closer
const TITLE_PX = 150, MENU_PX = 26             // at the ends of the level plot's upper margin

const drawRows = (page) => {
  const { m, now, held } = page, plot = m.share_plot
  const H = plot.inner_height
  if (!now || !(H > 0)) return
  const n = now.n_rows, high = H / n
  const size = Math.min(ROW_TEXT_MOST, Math.max(ROW_TEXT, high))
  if (m.row_text.text_font_size.value !== `${size}px`) m.row_text.text_font_size = { value: `${size}px` }
  const chosen = sameMode(now, page.chosen)
  const middle = (row) => n - row - 0.5
  const label = (row) => row < now.n_shown ? bareHertz(now.modes[row].frequency) : row === n - 1 ? "residual" : `${now.n_others} others`
  // Where rows are lower than their text, the ones that matter most keep their label.
  const matter = (row) => (row === chosen?.row ? 2 : 0) +
    (now.modes[row]?.kind === "pumping" || row === n - 1 ? 1 : now.modes[row]?.share ?? 0)
  const order = [...Array(n).keys()].sort((a, b) => matter(b) - matter(a)), kept = []
  for (const row of order) if (kept.every((k) => Math.abs(k - row) * high >= size * 0.92)) kept.push(row)
  const role = (row) => row === chosen?.row ? "accent" : row < now.n_shown ? KIND_ROLE[now.modes[row].kind] : "muted"
  put(m.share_rows, {
    x: kept.map(() => plot.x_range.start), y: kept.map(middle), text: kept.map(label), role: kept.map(role),
    style: kept.map((row) => row === chosen?.row || now.modes[row]?.kind === "pumping" ? "bold" : "normal"),
  })
  // The colour scale between its two words, above the map's right end.
  const right = plot.x_range.end, wide = (right - plot.x_range.start) / plot.inner_width
  put(m.share_legend, { image: m.share_legend.data.image, x: [right - 142 * wide], dw: [84 * wide], y: [n + 11 / high],
                        dh: [9 / high] })
  // A tick in each row at the mode's own frequency; grey where the held design has it.
  const ticks = { x0: [], y0: [], x1: [], y1: [], role: [] }
  const tick = (f, row, role, part) => {
    ticks.x0.push(Math.log10(f)); ticks.x1.push(Math.log10(f)); ticks.role.push(role)
    ticks.y0.push(middle(row) - part); ticks.y1.push(middle(row) + part)
  }
  for (const mode of now.modes) {
    const before = held && sameMode(held, mode)
    if (before) tick(before.frequency, mode.row, "held", 0.5)
    if (before) tick(mode.frequency, mode.row, KIND_ROLE[mode.kind], 0.3)
  }
  put(m.share_ticks, ticks)
  m.share_chosen.setv(chosen ? { bottom: n - chosen.row - 1, top: n - chosen.row, visible: true } : { visible: false })
}

const drawCursor = (page) => {
  const { m, now, f } = page
  if (!now) return
  const x = Math.log10(f), { start, end } = m.level_plot.x_range
  m.level_cursor.setv({ location: x })
  m.share_cursor.setv({ location: x })
  // The reading stands above the cursor, clear of the axis's title and of the menu.
  const { level, heard } = pressuresAt(now, f)
  const text = `${hertz(f)}  ${heard > 0 ? `${level.toFixed(1).replace("-", "−")} dB` : "silent"}`
  const W = m.level_plot.inner_width, at = W * (x - start) / (end - start), half = textWidth(text, 12) / 2
  const shift = Math.min(Math.max(0, TITLE_PX + half - at), Math.max(0, W - at)) - Math.max(0, at + half + MENU_PX - W)
  put(m.cursor_words, { x: [x], y: [m.level_plot.y_range.end], text: [text], shift: [shift] })
}
