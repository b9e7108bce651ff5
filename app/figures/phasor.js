// Phasor chain at the cursor; pascals, turned so that the total points to the right.
const chainOf = (p) => {
  const turn = p.heard > 0 ? [p.total[0] / p.heard, -p.total[1] / p.heard] : [1, 0]
  const links = []
  let x = 0, y = 0
  for (let k = 0; k < p.re.length; k++) {
    const dx = p.re[k] * turn[0] - p.im[k] * turn[1], dy = p.re[k] * turn[1] + p.im[k] * turn[0]
    links.push({ row: k, x0: x, y0: y, x1: x += dx, y1: y += dy, size: p.size[k], phase: Math.atan2(dy, dx) })
  }
  return links
}

const drawPhasor = (page) => {
  const { m, now, held, f } = page, plot = m.phasor_plot
  const W = plot.inner_width, H = plot.inner_height
  if (!now || !(W > 0)) return
  const p = pressuresAt(now, f), links = chainOf(p)
  const old = held ? chainOf(pressuresAt(held, f)) : []
  const ends = [...links, ...old].flatMap((l) => [[l.x0, l.y0], [l.x1, l.y1]]).concat([[p.heard, 0], [0, 0]])
  const xs = ends.map((e) => e[0]), ys = ends.map((e) => e[1])
  const box = { left: Math.min(...xs), right: Math.max(...xs), bottom: Math.min(...ys), top: Math.max(...ys) }
  const list = H > 190 ? 3 : 0                       // lines of the list below the chain
  const area = { left: 16, right: W - 16, top: 44, bottom: H - 16 - 15 * (list + 1) }
  const scale = Math.min((area.right - area.left) / Math.max(box.right - box.left, 1e-12),
                         (area.bottom - area.top) / Math.max(box.top - box.bottom, 1e-12))
  const middle = [(box.left + box.right) / 2, (box.bottom + box.top) / 2]
  const px = (x) => (area.left + area.right) / 2 + (x - middle[0]) * scale
  const py = (y) => (area.top + area.bottom) / 2 - (y - middle[1]) * scale
  const ux = (sx) => middle[0] + (sx - (area.left + area.right) / 2) / scale
  const uy = (sy) => middle[1] - (sy - (area.top + area.bottom) / 2) / scale
  plot.x_range.setv({ start: ux(0), end: ux(W) })
  plot.y_range.setv({ start: uy(H), end: uy(0) })

  const chosen = sameMode(now, page.chosen)?.row
  const style = (row) => row < now.n_shown ? now.modes[row].kind : "in-plane"
  const column = (fn) => links.map(fn)
  m.phasor.data = {
    x0: column((l) => l.x0), y0: column((l) => l.y0), x1: column((l) => l.x1), y1: column((l) => l.y1),
    frequency: column((l) => now.modes[l.row]?.frequency ?? NaN), magnitude: column((l) => l.size),
    phase: column((l) => l.phase),
    role: column((l) => l.row === chosen ? "accent" : l.row < now.n_shown ? KIND_ROLE[style(l.row)] : "muted"),
    dash: column((l) => KIND_DASH[style(l.row)]),
    width: column((l) => l.row === chosen ? 3.4 : l.row < now.n_shown ? KIND_WIDTH[style(l.row)] : 1.4),
  }
  put(m.phasor_held, { x: old.length ? [0, ...old.map((l) => l.x1)] : [], y: old.length ? [0, ...old.map((l) => l.y1)] : [] })
  put(m.phasor_total, { x0: [0], y0: [0], x1: [p.heard], y1: [0], angle: [-Math.PI / 2] })

  const words = { x: [], y: [], text: [], role: [], style: [], align: [] }
  const say = (sx, sy, text, role = "muted", style = "normal", align = "left") => {
    words.x.push(ux(sx)); words.y.push(uy(sy)); words.text.push(text)
    words.role.push(role); words.style.push(style); words.align.push(align)
  }
  say(2, 10, `Pressures at ${hertz(f)}, head to tail`, "ink", "bold")
  say(2, 27, `total ${quantity(p.heard, "Pa")} (peak), to the right`, "accent")
  const longest = [...links].sort((a, b) => b.size - a.size).filter((l) => l.size > 0.01 * p.made).slice(0, 3)
  const label = (row) => row < now.n_shown ? bareHertz(now.modes[row].frequency) : row === now.n_rows - 1 ? "residual" : "others"
  const taken = []
  const drawn = [...links, { x0: 0, y0: 0, x1: p.heard, y1: 0 }].map((l) => [px(l.x0), py(l.y0), px(l.x1), py(l.y1)])
  for (const l of longest) {
    const text = label(l.row), w = textWidth(text) + 4
    const spot = freeSpot(px((l.x0 + l.x1) / 2), py((l.y0 + l.y1) / 2), l.phase, w, area, taken, drawn)
    taken.push(spot)
    say(spot.x, spot.y, text, "ink", "normal", "center")
  }
  if (list) {
    longest.forEach((l, i) => {
      const y = H - 8 - 15 * (longest.length - i)
      const name = l.row < now.n_shown ? hertz(now.modes[l.row].frequency) : label(l.row)
      say(2, y, name, "ink")
      say(Math.min(W - 60, 150), y, quantity(l.size, "Pa"), "muted", "normal", "right")
      say(Math.min(W - 2, 205), y, `${digits(Math.round(l.phase * 180 / Math.PI))}°`, "muted", "normal", "right")
    })
  }
  say(2, H - 8, "phase relative to the total", "muted")
  put(m.phasor_words, words)
}

// A place for a label near a link's middle, clear of the lines and of the labels already placed; else the least bad one.
const freeSpot = (x, y, angle, w, area, taken, drawn) => {
  const normal = [Math.sin(angle), Math.cos(angle)], along = [Math.cos(angle), -Math.sin(angle)]
  const inside = (s) => s.x - w / 2 >= 0 && s.x + w / 2 <= area.right + 16 && s.y >= area.top - 6 && s.y <= area.bottom + 10
  const clear = (s) => taken.every((t) => Math.abs(t.x - s.x) > (t.w + w) / 2 || Math.abs(t.y - s.y) > 13)
  const crossed = (s) => drawn.some(([x0, y0, x1, y1]) => {
    const steps = Math.ceil(Math.hypot(x1 - x0, y1 - y0) / 4)
    for (let i = 0; i <= steps; i++) {
      const t = steps ? i / steps : 0
      if (Math.abs(x0 + t * (x1 - x0) - s.x) < w / 2 && Math.abs(y0 + t * (y1 - y0) - s.y) < 6) return true
    }
    return false
  })
  const reach = 9 + Math.abs(normal[0]) * w / 2, spots = []
  for (const far of [1, 1.6, 2.4]) {
    for (const slide of [0, 18, -18, 36, -36, 60, -60]) {
      for (const side of [far, -far]) {
        spots.push({ x: x + side * reach * normal[0] + slide * along[0], y: y - side * reach * normal[1] + slide * along[1], w })
      }
    }
  }
  const usable = spots.filter((s) => inside(s) && clear(s))
  return usable.find((s) => !crossed(s)) ?? usable[0] ?? { x, y: y - 12 - 13 * taken.length, w }
}
