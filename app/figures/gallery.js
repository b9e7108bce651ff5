// Mode gallery: tiles in pixels, y upwards; a page of them at a time.
const TILE = 118, GAP = 14, LINE = 15   // least width of a tile, gap between tiles, height of a line of words, px

const galleryModes = (page) => page.now.modes.filter((mode) => page.unfolded || mode.kind !== "in-plane")

// Tiles, shapes and words.
const layGallery = (page) => {
  const { m, now, held } = page, plot = m.gallery_plot
  const W = plot.inner_width, H = plot.inner_height
  if (!now || !(W > 0)) return
  plot.x_range.setv({ start: 0, end: W })
  plot.y_range.setv({ start: 0, end: H })
  const lines = H > 130 ? 3 : H > 95 ? 2 : 1
  const across = Math.max(2, Math.floor((W + GAP) / (TILE + GAP))), rows = Math.max(1, Math.floor(H / 175))
  const width = (W - 6 - GAP * (across - 1)) / across, height = H / rows
  const all = galleryModes(page), size = across * rows
  page.pages = Math.max(1, Math.ceil(all.length / size))
  page.sheet = Math.min(page.sheet, page.pages - 1)
  page.tiles = all.slice(page.sheet * size, (page.sheet + 1) * size).map((mode, i) => {
    const left = 3 + (i % across) * (width + GAP), top = H - Math.floor(i / across) * height
    return { mode, left, right: left + width, bottom: top - height, top, foot: top - height + LINE * (lines + 1) + 8 }
  })
  const fills = { xs: [], ys: [], role: [] }, old = { xs: [], ys: [] }
  const drawn = { xs: [], ys: [], role: [], dash: [], width: [], mode: [] }
  const axes = { x0: [], y0: [], x1: [], y1: [], role: [], width: [] }, words = { x: [], y: [], text: [], role: [] }
  for (const { mode, left, right, foot, top } of page.tiles) {
    const zero = (foot + top - 8) / 2, reach = (top - 8 - foot) / 2, role = KIND_ROLE[mode.kind]
    const place = (d, of) => {
      const shape = of.shape * d.radius.length, column = of.kind === "in-plane" ? d.radial : d.axial
      return [Array.from(d.radius, (r) => left + (right - left) * r / d.frame_radius),
              Array.from(d.radius, (_, k) => zero + reach * column[shape + k])]
    }
    const [x, y] = place(now, mode), end = x.length - 1
    fills.xs.push([x[0], ...x, x[end]]); fills.ys.push([zero, ...y, zero]); fills.role.push(role)
    drawn.xs.push(x); drawn.ys.push(y); drawn.role.push(role); drawn.dash.push(KIND_DASH[mode.kind])
    drawn.width.push(KIND_WIDTH[mode.kind]); drawn.mode.push(mode.mode)
    const before = held && sameMode(held, mode)
    if (before) {
      const [hx, hy] = place(held, before)
      old.xs.push(hx); old.ys.push(hy)
    }
    const centre = mode.kind === "in-plane" ? zero : y[0]   // the disk keeps its place along the meridian
    axes.x0.push(left, left); axes.x1.push(right, x[0]); axes.y0.push(zero, centre); axes.y1.push(zero, centre)
    axes.role.push("faint", "ink"); axes.width.push(1, 4)
    const texts = [mode.kind, `damping ${percent(mode.damping)}`, `${percent(mode.share)} of the sound`]
    const kept = lines === 3 ? texts : lines === 2 ? [texts[0], texts[2]] : [texts[2]]
    kept.forEach((text, k) => {
      words.x.push(left); words.y.push(foot - 8 - LINE * (k + 2)); words.text.push(text)
      words.role.push(k === 0 && lines > 1 ? role : "muted")
    })
  }
  put(m.gallery_fills, fills)
  put(m.gallery_held, old)
  put(m.gallery_lines, drawn)
  put(m.gallery_axes, axes)
  put(m.gallery_words, words)
  writeGalleryHead(page, all.length, size)
}

// What the cursor changes: how much of what is made each mode makes, and whose names are lit.
const markGallery = (page) => {
  const { m, now, f, tiles } = page
  if (!now || !(m.gallery_plot.inner_width > 0)) return
  const p = pressuresAt(now, f), chosen = sameMode(now, page.chosen)
  const lead = [...p.size.keys()].sort((i, j) => p.size[j] - p.size[i]).slice(0, 2)
  const marks = { left: [], right: [], bottom: [], top: [], role: [], alpha: [] }
  const mark = (left, right, bottom, top, role, alpha) => {
    marks.left.push(left); marks.right.push(right); marks.bottom.push(bottom); marks.top.push(top)
    marks.role.push(role); marks.alpha.push(alpha)
  }
  const heads = { x: [], y: [], text: [], role: [], mode: [] }
  for (const { mode, left, right, bottom, top, foot } of tiles) {
    const part = p.made > 0 ? p.size[mode.row] / p.made : 0
    if (mode === chosen) mark(left - 5, right + 5, bottom, top, "accent", 0.10)
    mark(left, right, foot - 5, foot - 3, "faint", 1)
    if (part > 0.005) mark(left, left + (right - left) * part, foot - 6, foot - 2, "accent", 1)
    const lit = mode === chosen || (lead.includes(mode.row) && part > 0.05)
    heads.x.push(left); heads.y.push(foot - 8 - LINE); heads.text.push(hertz(mode.frequency))
    heads.role.push(lit ? "accent" : "ink"); heads.mode.push(mode.mode)
  }
  put(m.gallery_marks, marks)
  put(m.gallery_heads, heads)
}

const writeGalleryHead = (page, count, size) => {
  const { m, now } = page, chosen = sameMode(now, page.chosen), { in_plane_count: n } = now
  const folded = n === 0 ? "" : `in-plane modes (${n})${page.unfolded ? "" : " folded away"}: ${percent(now.in_plane_share)} of the sound`
  const details = chosen ? `${hertz(chosen.frequency)} ${chosen.kind} mode, chosen: ${hertz(chosen.vacuum)} in vacuum, ` +
    `${percent(chosen.centre)} of its motion's energy in the centre, ${percent(chosen.inPlane)} along the film` : folded
  const first = page.sheet * size + 1
  setWord(m.gallery_head, "details", details)
  setWord(m.gallery_head, "fold", page.unfolded ? "fold in-plane" : "show in-plane", n === 0)
  setWord(m.gallery_head, "sheet", `${first}–${Math.min(first + size - 1, count)} of ${count}`)
}

const choose = (page, mode) => {
  const same = mode && page.chosen && page.chosen.kind === mode.kind && page.chosen.rank === mode.rank
  page.chosen = mode && !same ? { kind: mode.kind, rank: mode.rank } : null
  if (page.chosen && mode.kind === "in-plane") page.unfolded = true
  redraw(page)
}
// Choose the next or previous mode of the gallery and turn to its sheet.
const stepChoice = (page, step) => {
  const all = galleryModes(page), at = all.indexOf(sameMode(page.now, page.chosen))
  const next = at < 0 ? page.sheet * page.tiles.length : Math.min(all.length - 1, Math.max(0, at + step))
  if (next === at) return
  page.sheet = Math.floor(next / Math.max(1, page.tiles.length || 1))
  choose(page, all[next])
}
const clickGallery = (page, x, y) => {
  const tile = page.tiles.find((t) => x >= t.left - 5 && x <= t.right + 5 && y >= t.bottom && y <= t.top)
  if (tile) choose(page, tile.mode)
}
