// Row labels of the share map, the chosen row, the cursor line and its reading.
const ROW_TEXT = 8.5, ROW_TEXT_MOST = 11   // px

const drawRows = (page) => {
  const { m, now, held } = page, plot = m.share_plot
  const H = plot.inner_height
  if (!now || !(H > 0)) return
  const n = now.n_rows, high = H / n
  const size = Math.min(ROW_TEXT_MOST, Math.max(ROW_TEXT, high * 0.98))
  m.row_text.setv({ text_font_size: `${size}px` })
  const chosen = sameMode(now, page.chosen)
  const middle = (row) => n - row - 0.5
  const label = (row) => row < now.n_shown ? bareHertz(now.modes[row].frequency) : row === n - 1 ? "residual" : `${now.n_others} others`
  // Where rows are lower than their text, the ones that matter most keep their label.
  const matter = (row) => (row === chosen?.row ? 2 : 0) + (now.modes[row]?.share ?? (row === n - 1 ? 1 : 0))
  const order = [...Array(n).keys()].sort((a, b) => matter(b) - matter(a)), kept = []
  for (const row of order) if (kept.every((k) => Math.abs(k - row) * high >= size * 0.95)) kept.push(row)
  const role = (row) => row === chosen?.row ? "accent" : row < now.n_shown ? KIND_ROLE[now.modes[row].kind] : "muted"
  m.share_rows.data = {
    x: kept.map(() => plot.x_range.start), y: kept.map(middle), text: kept.map(label), role: kept.map(role),
    style: kept.map((row) => row === chosen?.row || now.modes[row]?.kind === "pumping" ? "bold" : "normal"),
  }
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
  m.share_ticks.data = ticks
  m.share_chosen.setv(chosen ? { bottom: n - chosen.row - 1, top: n - chosen.row, visible: true } : { visible: false })
}

const drawCursor = (page) => {
  const { m, now, f } = page
  if (!now) return
  const x = Math.log10(f), { start, end } = m.level_plot.x_range
  m.level_cursor.setv({ location: x })
  m.share_cursor.setv({ location: x })
  const right = (x - start) / (end - start) < 0.75
  m.cursor_words.data = { x: [x], y: [m.level_plot.y_range.end], text: [`${hertz(f)}  ${digits(pressuresAt(now, f).level)} dB`],
                          align: [right ? "left" : "right"], shift: [right ? 6 : -6] }
}
