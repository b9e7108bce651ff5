// The page of the limits in the browser: the cursor in its plots, the bias that is dragged, words, saving.
const KEY_STEP = 10                         // V a key press moves the bias; ten times as much with Shift
const WORDS = {
  window_plot: "Rest height against bias. Left and right arrows move the bias, Shift by ten steps.",
  tuning_plot: "Frequencies of the modes against bias. Left and right arrows move the bias, Shift by ten steps.",
  impedance_plot: "Impedance against frequency. Left and right arrows move the cursor.",
  phase_plot: "Phase of the impedance against frequency. Left and right arrows move the cursor.",
  current_plot: "Current against frequency. Left and right arrows move the cursor.",
}
const OVER_BIAS = ["window_plot", "tuning_plot"]

const bootLimits = (m, page) => {
  const t = page.tools
  const limits = { drag: null, count: 0, asked: false }
  const now = () => Object.fromEntries(Object.entries(m.limits.data).map(([key, column]) => [key, column[0]]))

  const drawBias = ({ bias_kv, low_kv, high_kv }) => {
    const at = limits.drag ?? bias_kv, moved = at - bias_kv, { start, end } = m.window_plot.x_range
    for (const line of biases) line.setv({ location: at, visible: true })
    for (const bar of swings) bar.setv({ left: Math.max(0, low_kv + moved), right: high_kv + moved, visible: true })
    const right = at > start + 0.5 * (end - start)
    const volts = (kv) => `${kv < 0 ? "−" : ""}${t.digits(Math.abs(kv))}`
    const text = `bias ${at.toFixed(2)} kV, drive ${volts(low_kv + moved)} – ${volts(high_kv + moved)} kV`
    // beside the line, where there is more room, and never outside of the plot
    const place = m.window_plot.inner_width * (at - start) / (end - start), room = right ? place : m.window_plot.inner_width - place
    const back = Math.max(0, t.textWidth(text, 12) + 6 - room)
    t.put(m.bias_words, { x: [at], y: [m.window_plot.y_range.start], text: [text], align: [right ? "right" : "left"],
                          shift: [right ? back - 6 : 6 - back] })
  }
  const scaled = (value, unit) => {
    const [factor, prefix] = [[1e9, "G"], [1e6, "M"], [1e3, "k"], [1, ""], [1e-3, "m"], [1e-6, "µ"], [1e-9, "n"]]
      .find(([f]) => value >= f) ?? [1e-9, "n"]
    return `${t.digits(value / factor)} ${prefix}${unit}`
  }
  const drawReadings = () => {
    const d = m.electrical.data, n = d.frequency.length
    if (n === 0) return
    for (const line of cursors) line.setv({ location: Math.log10(page.f) })
    const [i, j, w] = t.bracket({ frequency: d.frequency, n }, page.f)
    const at = (column) => (1 - w) * d[column][i] + w * d[column][j]
    const read = (name, text) => t.put(m[`${name}_reading`], { x: [m[`${name}_plot`].x_range.end],
                                                              y: [m[`${name}_plot`].y_range.end], text: [text] })
    read("impedance", `${t.hertz(page.f)}  ${scaled(10 ** at("log_impedance"), "Ω")}`)
    read("phase", `${at("phase").toFixed(1).replace("-", "−")}°`)
    read("current", scaled(10 ** at("log_current"), "A"))
  }
  const draw = () => {
    const shown = now()
    if (shown.bias_kv === undefined || !(m.window_plot.inner_width > 0)) return
    drawBias(shown)
    drawReadings()
    t.setHtml(m.verdict, "verdict", shown.html)
  }
  page.others.push(draw)
  m.limits.connect(m.limits.properties.data.change, draw)
  m.verdict.connect(m.verdict.change, () => queueMicrotask(draw))

  // ---- the bias, moved in the picture: sent once a frame at most, and when it is let go
  const send = (released) => {
    limits.count += 1
    m.moved_bias.data = { volts: [1000 * limits.drag], released: [released], count: [limits.count] }
  }
  const moveBias = (kv, released) => {
    limits.drag = Math.min(Math.max(kv, 0), m.window_plot.x_range.end)
    draw()
    if (released) {
      send(true)
      limits.drag = null
    } else if (!limits.asked) {
      limits.asked = true
      requestAnimationFrame(() => {
        limits.asked = false
        if (limits.drag !== null) send(false)
      })
    }
  }
  const pointedBias = (plot, event) => {
    const { start, end } = plot.x_range
    return start + Math.min(Math.max(t.pointed(plot, event).part, 0), 1) * (end - start)
  }
  const drags = (plot, el) => {
    el.style.cursor = "ew-resize"
    el.addEventListener("pointerdown", (event) => {
      if (event.button !== 0 || now().bias_kv === undefined) return
      el.setPointerCapture(event.pointerId)
      moveBias(pointedBias(plot, event), false)
    })
    el.addEventListener("pointermove", (event) => {
      if (el.hasPointerCapture(event.pointerId)) moveBias(pointedBias(plot, event), false)
    })
    for (const end of ["pointerup", "pointercancel"]) {
      el.addEventListener(end, () => { if (limits.drag !== null) moveBias(limits.drag, true) })
    }
    el.addEventListener("keydown", (event) => {
      const way = { ArrowRight: 1, ArrowLeft: -1 }[event.key], shown = now()
      if (!way || event.ctrlKey || event.metaKey || event.altKey || shown.bias_kv === undefined) return
      event.preventDefault()
      event.stopPropagation()
      moveBias(shown.bias_kv + way * KEY_STEP * (event.shiftKey ? 10 : 1) / 1000, true)
    })
  }
  // ---- places, keys, saving
  const laidOut = t.place(page, m, WORDS, draw, (plot, el, name) => {
    el.setAttribute("role", "application")
    if (OVER_BIAS.includes(name)) drags(plot, el)
    else t.followPointer(page, plot, el)
  })
  const lines = (source) => source.data.xs.flatMap((x, k) => Array.from(x, (bias, i) => [k + 1, bias, 10 ** source.data.ys[k][i]]))
  Object.assign(t.NUMBERS, {
    window: () => {
      const [a, b] = [m.window.data, m.window_beyond.data]
      return { bias_kV: [...a.bias_kv, ...b.bias_kv], height_mm: [...a.height_mm, ...b.height_mm],
               stable: [...Array.from(a.bias_kv, () => 1), ...Array.from(b.bias_kv, () => 0)] }
    },
    tuning: () => {
      const rows = [...lines(m.window_modes), ...lines(m.window_modes_beyond)]
      return { mode: rows.map((r) => r[0]), bias_kV: rows.map((r) => r[1]), frequency_Hz: rows.map((r) => r[2]) }
    },
    impedance: () => ({ frequency_Hz: m.electrical.data.frequency, impedance_ohm: m.electrical.data.impedance,
                        phase_deg: m.electrical.data.phase }),
    phase: () => t.NUMBERS.impedance(),
    current: () => ({ frequency_Hz: m.electrical.data.frequency, current_A: m.electrical.data.current }),
  })
  laidOut()
  return limits
}
if (models.level_plot.elastovox && !models.window_plot.limits) {
  models.window_plot.limits = bootLimits(models, models.level_plot.elastovox)
}
