// Mode gallery: tiles in pixels, y upwards; a page of them at a time.
const TILE = 118, GAP = 14, LINE = 15   // least width of a tile, gap between tiles, height of a line of words, px

const galleryModes = (page) => page.now.modes.filter((mode) => page.unfolded || mode.kind !== "in-plane")

const drawGallery = (page) => {
  const { m, now, held, f } = page, plot = m.gallery_plot
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
  page.tiles = []
  const p = pressuresAt(now, f), points = now.radius.length
  const lead = [...p.size.keys()].sort((i, j) => p.size[j] - p.size[i])
  const marks = { left: [], right: [], bottom: [], top: [], role: [], alpha: [] }
  const fills = { xs: [], ys: [], role: [] }, old = { xs: [], ys: [] }
  const drawn = { xs: [], ys: [], role: [], dash: [], width: [], mode: [] }
  const axes = { x0: [], y0: [], x1: [], y1: [], role: [], width: [] }
  const heads = { x: [], y: [], text: [], role: [], mode: [] }, words = { x: [], y: [], text: [], role: [] }
  const mark = (left, right, bottom, top, role, alpha) => {
    marks.left.push(left); marks.right.push(right); marks.bottom.push(bottom); marks.top.push(top)
    marks.role.push(role); marks.alpha.push(alpha)
  }
  all.slice(page.sheet * size, (page.sheet + 1) * size).forEach((mode, i) => {
    const left = 3 + (i % across) * (width + GAP), top = H - Math.floor(i / across) * height
    const chosen = sameMode(now, page.chosen) === mode
    page.tiles.push({ left, right: left + width, bottom: top - height, top, mode })
    const foot = top - height + LINE * (lines + 1) + 8      // lower edge of the shape
    const zero = (foot + top - 8) / 2, reach = (top - 8 - foot) / 2
    const place = (d, of) => {
      const shape = of.shape * d.radius.length
      const column = of.kind === "in-plane" ? d.radial : d.axial
      const x = Array.from(d.radius, (r) => left + width * r / d.frame_radius)
      return [x, Array.from(x, (_, k) => zero + reach * column[shape + k])]
    }
    if (chosen) mark(left - 5, left + width + 5, top - height, top, "accent", 0.10)
    const [x, y] = place(now, mode), role = KIND_ROLE[mode.kind]
    fills.xs.push([x[0], ...x, x[points - 1]]); fills.ys.push([zero, ...y, zero]); fills.role.push(role)
    drawn.xs.push(x); drawn.ys.push(y); drawn.role.push(role); drawn.dash.push(KIND_DASH[mode.kind])
    drawn.width.push(KIND_WIDTH[mode.kind]); drawn.mode.push(mode.mode)
    const before = held && sameMode(held, mode)
    if (before) {
      const [hx, hy] = place(held, before)
      old.xs.push(hx); old.ys.push(hy)
    }
    const centre = mode.kind === "in-plane" ? zero : y[0]   // the disk keeps its place along the meridian
    axes.x0.push(left, left); axes.x1.push(left + width, x[0]); axes.y0.push(zero, centre); axes.y1.push(zero, centre)
    axes.role.push("faint", "ink"); axes.width.push(1, 4)
    const part = p.made > 0 ? p.size[mode.row] / p.made : 0
    mark(left, left + width, foot - 5, foot - 3, "faint", 1)
    if (part > 0.005) mark(left, left + width * part, foot - 6, foot - 2, "accent", 1)
    const lit = chosen || (lead.slice(0, 2).includes(mode.row) && part > 0.05)
    heads.x.push(left); heads.y.push(foot - 8 - LINE); heads.text.push(hertz(mode.frequency))
    heads.role.push(lit ? "accent" : "ink"); heads.mode.push(mode.mode)
    const texts = [`${mode.kind}`, `damping ${percent(mode.damping)}`, `${percent(mode.share)} of the sound`]
    const kept = lines === 3 ? texts : lines === 2 ? [texts[0], texts[2]] : [texts[2]]
    kept.forEach((text, k) => {
      words.x.push(left); words.y.push(foot - 8 - LINE * (k + 2)); words.text.push(text)
      words.role.push(k === 0 && lines > 1 ? role : "muted")
    })
  })
  m.gallery_marks.data = marks; m.gallery_fills.data = fills; m.gallery_held.data = old; m.gallery_lines.data = drawn
  m.gallery_axes.data = axes; m.gallery_heads.data = heads; m.gallery_words.data = words
  writeGalleryHead(page, all.length, size)
}

const writeGalleryHead = (page, count, size) => {
  const { m, now } = page, chosen = sameMode(now, page.chosen), { in_plane_count: n } = now
  const folded = n === 0 ? "" : `in-plane modes (${n})${page.unfolded ? "" : " folded away"}: ${percent(now.in_plane_share)} of the sound`
  const details = chosen ? `${hertz(chosen.frequency)} ${chosen.kind} mode, chosen: ${hertz(chosen.vacuum)} in vacuum, ` +
    `${percent(chosen.centre)} of its motion's energy in the centre, ${percent(chosen.inPlane)} along the film` : folded
  const first = page.sheet * size + 1
  setWord(page, m.gallery_head, "details", details)
  setWord(page, m.gallery_head, "fold", page.unfolded ? "fold in-plane" : "show in-plane", n === 0)
  setWord(page, m.gallery_head, "sheet", `${first}–${Math.min(first + size - 1, count)} of ${count}`)
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
