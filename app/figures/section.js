// Section to scale at rest, moving; millimetres, both sides mirrored.
const PERIOD_MS = 1600, FRAME_MS = 40      // of one drawn period; between frames
const BUSY_MS = 400                        // after new data only those paint it: a drag needs the time
const ROOM = 0.14, STEEPEST = 0.7          // drawn motion over frame radius; drawn strain along the film, below folding

const mirror = (radius, height, x, y) => {
  const n = radius.length
  for (let p = 0; p < n; p++) {
    x[n - 1 - p] = -radius[p]
    x[n + p] = radius[p]
    y[n - 1 - p] = y[n + p] = height[p]
  }
}
const outline = (d) => {
  const n = d.radius.length, x = new Float32Array(2 * n), y = new Float32Array(2 * n)
  mirror(d.radius.map((v) => 1e3 * v), d.height.map((v) => 1e3 * v), x, y)
  return { x, y }
}

// A readable factor that makes the motion visible and lets no part of the film fold over its neighbour.
const drawnFactor = (field, d) => {
  if (!(field.largest > 0)) return 1
  let strain = 0
  for (let p = 1; p < d.radius.length; p++) {
    const step = Math.hypot(field.r_re[p] - field.r_re[p - 1], field.r_im[p] - field.r_im[p - 1])
    strain = Math.max(strain, step / (d.radius[p] - d.radius[p - 1]))
  }
  return roundDown(Math.min(ROOM * d.frame_radius / field.largest, STEEPEST / Math.max(strain, 1e-12)))
}

// What neither the cursor nor time moves: ranges, frame, rear, shapes at rest, scale bar.
const laySection = (page) => {
  const { m, now, held } = page, plot = m.section_plot
  const W = plot.inner_width, H = plot.inner_height
  if (!now || !(W > 0)) return
  const b = 1e3 * now.frame_radius
  const heights = Array.from(now.height, (v) => 1e3 * v), lowest = Math.min(...heights, 0)
  const top = Math.max(...heights, 0) + ROOM * b, half = 1.24 * b
  const area = { top: 42, bottom: H - 24 }
  const scale = Math.min(W / (2 * half), (area.bottom - area.top) / (top - lowest + 0.55 * b))
  const spare = Math.max(0, area.bottom - area.top - scale * (top - lowest + 0.8 * b)) / 2   // in the middle of its place
  const ux = (sx) => (sx - W / 2) / scale, uy = (sy) => top - (sy - area.top - spare) / scale
  plot.x_range.setv({ start: ux(0), end: ux(W) })
  plot.y_range.setv({ start: uy(H), end: uy(0) })
  const floor = Math.max(uy(area.bottom), lowest - 0.8 * b)
  const beam = [-0.025 * b, 0.025 * b, 0.025 * b, -0.025 * b]
  put(m.section_frame, { xs: [[-b, -b, -half, -half], [b, b, half, half]], ys: [beam, beam] })
  const depth = now.rear_volume === null ? 0 : 1e9 * now.rear_volume / (Math.PI * b * b)
  const fits = depth > 0 && -depth > floor
  const bottom = fits ? -depth : floor
  const post = 0.12 * b                              // a bracket under the spring of an open one
  put(m.section_rear, depth === 0 ? { xs: [[-post, post]], ys: [[floor, floor]] }
    : fits ? { xs: [[-b, -b, b, b]], ys: [[0, bottom, bottom, 0]] }
    : { xs: [broken(-b, b), broken(b, b), [-b, b]], ys: [brokenY(bottom), brokenY(bottom), [bottom, bottom]] })
  put(m.section_rest, outline(now))
  put(m.section_held, held ? outline(held) : { x: [], y: [] })
  const bar = roundDown(0.5 * b)
  put(m.section_bar, { x: [ux(4), ux(4) + bar], y: [uy(H - 9), uy(H - 9)] })
  page.laid = { ux, uy, W, H, bar, scale, bottom, fits }
  const n = 2 * now.radius.length
  if (m.section.data.x.length !== n) m.section.data = { x: new Float32Array(n), y: new Float32Array(n) }
}
const litres = (volume) => volume >= 1e-3 ? `${digits(1e3 * volume, 2)} l` : `${digits(1e6 * volume, 2)} ml`

// The motion at the cursor and its words.
const setSection = (page) => {
  const { m, now, f, laid } = page
  if (!now || !laid) return
  const { ux, uy, W, H, bar, scale, bottom, fits } = laid, chosen = sameMode(now, page.chosen)
  const field = motionAt(now, f, chosen ? chosen.shape : null), factor = drawnFactor(field, now)
  page.moving = { field, factor, bottom, a: 1e3 * now.centre_radius, radius: now.radius, height: now.height,
                  spring: now.spring_free_height !== null }
  const words = { x: [], y: [], text: [], role: [], style: [], align: [] }
  const say = (sx, sy, text, role = "muted", style = "normal", align = "left") => {
    words.x.push(ux(sx)); words.y.push(uy(sy)); words.text.push(text)
    words.role.push(role); words.style.push(style); words.align.push(align)
  }
  say(2, 10, chosen ? `Motion of the ${hertz(chosen.frequency)} mode` : `Motion at ${hertz(f)}`, "ink", "bold")
  say(2, 27, `${chosen ? `at ${hertz(f)} ` : ""}largest ${quantity(field.largest, "m")}, drawn × ${digits(factor)}`)
  say(4 + bar * scale + 6, H - 9, `${digits(bar)} mm`)
  say(W - 4, H - 9, now.rear_volume === null ? "rear open" : `rear ${litres(now.rear_volume)}${fits ? "" : ", not to scale"}`,
      "muted", "normal", "right")
  put(m.section_words, words)
  paintMotion(page)
}
const broken = (x, b) => [x, x, x - 0.03 * b, x + 0.03 * b, x, x]
const brokenY = (bottom) => [0, 0.62 * bottom, 0.66 * bottom, 0.70 * bottom, 0.74 * bottom, bottom]

// The moving parts at one moment; writes into the arrays that are there and says so.
const paintMotion = (page) => {
  const { m, moving, phase } = page
  if (!moving || !m.section.data.x.length) return
  const { field, factor, bottom, a, radius, height } = moving
  const c = Math.cos(phase), s = Math.sin(phase), n = radius.length, k = 1e3 * factor
  const x = m.section.data.x, y = m.section.data.y
  for (let p = 0; p < n; p++) {
    const r = 1e3 * radius[p] + k * (field.r_re[p] * c - field.r_im[p] * s)
    const z = 1e3 * height[p] + k * (field.z_re[p] * c - field.z_im[p] * s)
    x[n - 1 - p] = -r
    x[n + p] = r
    y[n - 1 - p] = y[n + p] = z
  }
  m.section.change.emit()
  const z = y[n]
  put(m.section_centre, { x0: [-a], y0: [z], x1: [a], y1: [z] })
  put(m.section_spring, moving.spring ? coil(bottom, z, 0.35 * a) : { x: [], y: [] })
}
const coil = (from, to, half) => {
  const turns = 14, x = [0], y = [from]
  for (let i = 0; i <= turns; i++) {
    x.push(i === 0 || i === turns ? 0 : i % 2 ? half : -half)
    y.push(from + (to - from) * (0.06 + 0.88 * i / turns))
  }
  return { x: [...x, 0], y: [...y, to] }
}

// Runs until the page is left or paused; one loop a page.
const animate = (page) => {
  if (page.loop) return
  page.loop = true
  let last = 0
  const step = (time) => {
    if (page.m.section.document === null || !page.playing) {
      page.loop = false
      return
    }
    if (time - last >= FRAME_MS) {
      page.phase = (page.phase + 2 * Math.PI * Math.min(time - last, 100) / PERIOD_MS) % (2 * Math.PI)
      last = time
      if (time - page.shown > BUSY_MS && onScreen(page.m.section_plot)) paintMotion(page)
    }
    requestAnimationFrame(step)
  }
  requestAnimationFrame(step)
}
