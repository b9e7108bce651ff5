// The page of distortion in the browser: the cursor in its plots, bars and one cycle at the cursor, words, saving.
const SAID = {
  sine_plot: "Distortion against frequency under the sine drive. Left and right arrows move the cursor.",
  root_plot: "Distortion against frequency under the square-root drive. Left and right arrows move the cursor.",
  harmonics_plot: "Harmonics at the cursor, both drives",
  cycle_plot: "One cycle of voltage, centre motion and sound at the cursor",
  series_plot: "Distortion against amplitude at the cursor's frequency",
  map_plot: "Map of distortion over frequency and amplitude. Left and right arrows move the cursor.",
}
const OVER_FREQUENCY = ["sine_plot", "root_plot", "map_plot"]
const ORDERS = 9, POINTS = 121, LEAST_DB = -90
const SETTLED = 250                          // ms the cursor rests before the server is asked about its frequency

const bootDistortion = (m, page) => {
  const t = page.tools
  const here = () => m.sine_plot.inner_width > 0 && t.onScreen(m.sine_plot)
  const now = () => Object.fromEntries(Object.entries(m.distortion.data).map(([key, column]) => [key, column[0]]))

  // Complex amplitudes of one law at the cursor's frequency once the server has said them, till then at the grid frequency
  // nearest to it; null where there are none.
  const exactly = (name) => {
    const row = m.exact.data.law.indexOf(name === "sine" ? "sine" : "square-root")
    if (row < 0 || Math.abs(m.exact.data.frequency[row] / page.f - 1) > 1e-5 || m.distortion.data.exact[0] !== true) return null
    const parts = m.exact_parts.data
    const pick = (key) => Array.from({ length: ORDERS }, (_, k) => [parts[`${key}_re`][row * ORDERS + k], parts[`${key}_im`][row * ORDERS + k]])
    return { frequency: page.f, thd: 10 ** (m.exact.data.thd[row] - 2), sound: pick("p"), centre: pick("c"), source: pick("v") }
  }
  const at = (name) => exactly(name) ?? nearby(name)
  const nearby = (name) => {
    const d = m[name].data, n = d.frequency.length, parts = m[`${name}_parts`].data
    if (n === 0 || parts.p_re.length !== n * ORDERS) return null
    const [low, high, w] = t.bracket({ frequency: d.frequency, n }, page.f), i = w < 0.5 ? low : high
    const pick = (key) => Array.from({ length: ORDERS }, (_, k) => [parts[`${key}_re`][i * ORDERS + k], parts[`${key}_im`][i * ORDERS + k]])
    return { frequency: d.frequency[i], thd: 10 ** (d.thd[i] - 2), sound: pick("p"), centre: pick("c"), source: pick("v") }
  }
  const sizes = (found) => found.sound.map(([re, im]) => Math.hypot(re, im))

  const drawBars = (law, found, data) => {
    const bars = { left: [], right: [], top: [], bottom: [] }
    if (found && Number.isFinite(found.thd)) {
      const size = sizes(found), total = Math.hypot(...size)
      for (let k = 1; k < ORDERS && total > 0; k++) {
        const top = 20 * Math.log10(Math.max(size[k] / total, 1e-9))
        if (top <= LEAST_DB) continue
        bars.left.push(law === "sine" ? k - 0.36 : k + 0.04); bars.right.push(law === "sine" ? k - 0.04 : k + 0.36)
        bars.top.push(top); bars.bottom.push(LEAST_DB)
      }
    }
    t.put(data, bars)
  }

  // One cycle, three curves one above the other, each in its own scale.
  const cycle = (orders) => Array.from({ length: POINTS }, (_, p) => {
    const angle = 2 * Math.PI * p / (POINTS - 1)
    return orders.reduce((sum, [re, im], k) => sum + re * Math.cos(k * angle) - im * Math.sin(k * angle), 0)
  })
  const ROWS = [["source", "source", 2.5], ["centre", "centre", 1.5], ["sound", "sound", 0.5]]
  const drawCycle = (mine, other, bias) => {
    const degrees = Array.from({ length: POINTS }, (_, p) => 360 * p / (POINTS - 1))
    const waves = { xs: [], ys: [] }, others = { xs: [], ys: [] }
    const words = { x: [], y: [], text: [], align: [], shift: [] }
    const say = (x, y, text, align, shift) => {
      words.x.push(x); words.y.push(y); words.text.push(text); words.align.push(align); words.shift.push(shift)
    }
    if (mine && Number.isFinite(mine.thd)) {
      for (const [label, key, middle] of ROWS) {
        const wave = cycle(mine[key]), second = other && Number.isFinite(other.thd) ? cycle(other[key]) : []
        const all = [...wave, ...second], low = Math.min(...all), high = Math.max(...all)
        const place = (v) => middle + 0.8 * ((v - low) / Math.max(high - low, 1e-30) - 0.5)
        waves.xs.push(degrees); waves.ys.push(wave.map(place))
        if (second.length) { others.xs.push(degrees); others.ys.push(second.map(place)) }
        const unit = { source: "V", centre: "m", sound: "Pa" }[key], shift = key === "source" ? bias : 0
        const text = (v) => `${v < 0 ? "−" : ""}${scaled(Math.abs(v), unit)}`
        say(0, middle, label, "right", -8)
        say(360, middle + 0.3, text(Math.max(...wave) + shift), "left", 8)
        say(360, middle - 0.3, text(Math.min(...wave) + shift), "left", 8)
      }
    }
    t.put(m.waves, waves)
    t.put(m.other_waves, others)
    t.put(m.wave_words, words)
  }
  const scaled = (value, unit) => {
    if (value === 0) return `0 ${unit}`
    const [factor, prefix] = [[1e3, "k"], [1, ""], [1e-3, "m"], [1e-6, "µ"], [1e-9, "n"]].find(([f]) => value >= f) ?? [1e-9, "n"]
    return `${t.digits(value / factor)} ${prefix}${unit}`
  }

  let asking = null, asked = null
  const askSettled = () => {
    if (page.f === asked) return
    asked = page.f
    clearTimeout(asking)
    asking = setTimeout(() => t.ask(page, { settled: page.f }), SETTLED)
  }

  const draw = () => {
    if (!here()) return
    const { law, bias } = now()
    t.setHtml(m.map_words, "map", m.distortion_words.data.map[0])
    for (const line of cursors) line.setv({ location: Math.log10(page.f) })
    if (law === undefined) return
    const found = { "sine": at("sine"), "root": at("root") }
    for (const name of ["sine", "root"]) {
      const f = found[name], text = !f ? "" : Number.isFinite(f.thd) ? `${t.hertz(f.frequency)}  ${t.percent(f.thd)}` : `${t.hertz(f.frequency)}  –`
      t.put(m[`${name}_reading`], { x: [m[`${name}_plot`].x_range.end], y: [m[`${name}_plot`].y_range.end], text: [text] })
    }
    drawBars("sine", found.sine, m.bars)
    drawBars("square-root", found.root, m.open_bars)
    const mine = law === "sine" ? "sine" : "root", other = law === "sine" ? "root" : "sine"
    drawCycle(found[mine], found[other], bias)
    const f = found[mine] ?? found[other]
    t.put(m.bar_reading, { x: [m.harmonics_plot.x_range.end], y: [m.harmonics_plot.y_range.end], text: [f ? t.hertz(f.frequency) : ""] })
    askSettled()
  }
  page.others.push(draw)
  for (const data of [m.distortion, m.sine, m.root, m.sine_parts, m.root_parts, m.distortion_words, m.exact_parts]) {
    data.connect(data.properties.data.change, () => queueMicrotask(draw))
  }
  m.map_words.connect(m.map_words.change, () => queueMicrotask(draw))
  t.ACTIONS.map = () => t.ask(page, { map: true })

  // ---- places, keys, saving
  const laidOut = t.place(page, m, SAID, draw, (plot, el, name) => {
    el.setAttribute("role", OVER_FREQUENCY.includes(name) ? "application" : "img")
    if (OVER_FREQUENCY.includes(name)) t.followPointer(page, plot, el)
  })
  page.own.push(m.map_words)
  const percents = (column) => Array.from(column, (v) => 10 ** v)
  const curves = (name) => () => {
    const d = m[name].data
    return { frequency_Hz: d.frequency, thd_percent: percents(d.thd), h2_percent: percents(d.h2), h3_percent: percents(d.h3),
             h4_percent: percents(d.h4), h5_percent: percents(d.h5) }
  }
  const both = () => ["sine", "root"].map((name) => [name, at(name)]).filter(([, found]) => found)
  Object.assign(t.NUMBERS, {
    sine: curves("sine"), root: curves("root"),
    harmonics: () => {
      const rows = both().flatMap(([name, found]) => sizes(found).slice(1).map((size, k) => [name, found.frequency, k + 1, size]))
      return { drive: rows.map((r) => r[0]), frequency_Hz: rows.map((r) => r[1]), harmonic: rows.map((r) => r[2]), pressure_Pa: rows.map((r) => r[3]) }
    },
    cycle: () => {
      const rows = both().flatMap(([name, found]) => {
        const [source, centre, sound] = ["source", "centre", "sound"].map((key) => cycle(found[key]))
        return source.map((v, p) => [name, 360 * p / (POINTS - 1), v + now().bias, centre[p], sound[p]])
      })
      return { drive: rows.map((r) => r[0]), phase_deg: rows.map((r) => r[1]), source_V: rows.map((r) => r[2]),
               centre_m: rows.map((r) => r[3]), sound_Pa: rows.map((r) => r[4]) }
    },
    series: () => {
      const rows = ["sine", "root"].flatMap((name) => Array.from(m[`series_${name}`].data.amplitude,
        (v, i) => [name, v, 10 ** m[`series_${name}`].data.thd[i]]))
      return { drive: rows.map((r) => r[0]), amplitude_V: rows.map((r) => r[1]), thd_percent: rows.map((r) => r[2]) }
    },
    map: () => ({ frequency_Hz: m.map_numbers.data.frequency, amplitude_V: m.map_numbers.data.amplitude,
                  thd_percent: m.map_numbers.data.thd_percent }),
  })
  laidOut()
  return { draw }
}
if (models.level_plot.elastovox && !models.sine_plot.distortion) {
  models.sine_plot.distortion = bootDistortion(models, models.level_plot.elastovox)
}
