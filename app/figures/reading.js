// The server's columns as one object, and what holds at one frequency.

// Data of one design from its sources; null while there are none.
const read = (m) => {
  const level = m.level.data, still = m.still.data, g = m.gallery.data
  const n = level.frequency.length
  if (n === 0 || still.n_rows.length === 0) return null
  const one = Object.fromEntries(Object.entries(still).map(([key, column]) => [key, column[0]]))
  const modes = Array.from({ length: one.n_shown }, (_, i) => ({
    row: i, mode: g.mode[i], frequency: g.frequency[i], vacuum: g.frequency_vacuum[i], kind: g.kind[i], rank: g.rank[i],
    damping: g.damping_ratio[i], share: g.energy_share[i], centre: g.centre_share[i], inPlane: g.in_plane_share[i],
    shape: g.shape[i],
  }))
  return {
    ...one, n, modes, frequency: level.frequency, x: level.x, level: level.level_db,
    made: level.made, re: m.rows.data.re, im: m.rows.data.im,
    n_moving: m.moving.data.row.length, motion_re: m.motion.data.re, motion_im: m.motion.data.im,
    radial: m.shapes.data.radial, axial: m.shapes.data.axial, radius: m.nodes.data.radius, height: m.nodes.data.height,
  }
}

// Neighbouring grid points of a frequency and the weight of the second (straight line over log frequency).
const bracket = (d, f) => {
  let low = 0, high = d.n - 1
  if (f <= d.frequency[low]) return [low, low, 0]
  if (f >= d.frequency[high]) return [high, high, 0]
  while (high - low > 1) {
    const middle = (low + high) >> 1
    if (d.frequency[middle] <= f) low = middle
    else high = middle
  }
  return [low, high, Math.log(f / d.frequency[low]) / Math.log(d.frequency[high] / d.frequency[low])]
}
const nearest = (d, f) => {
  const [i, j, w] = bracket(d, f)
  return w < 0.5 ? i : j
}

const blend = (values, count, [i, j, w]) =>
  Float64Array.from({ length: count }, (_, k) => (1 - w) * values[i * count + k] + w * values[j * count + k])

// Pressures of the rows at a frequency, their total, and how much of what the motions make is heard.
const pressuresAt = (d, f) => {
  const at = bracket(d, f)
  const re = blend(d.re, d.n_rows, at), im = blend(d.im, d.n_rows, at)
  const size = re.map((r, k) => Math.hypot(r, im[k]))
  const made = blend(d.made, 1, at)[0]               // of every mode: the row of others is already a sum
  const total = [re.reduce((a, b) => a + b, 0), im.reduce((a, b) => a + b, 0)]
  const heard = Math.hypot(...total)
  const level = (1 - at[2]) * d.level[at[0]] + at[2] * d.level[at[1]]
  return { re, im, size, made, total, heard, survival: made > 0 ? heard / made : 0, level }
}

// Complex displacement along the meridian at a frequency, of all modes or of one (its index among the moving ones).
const motionAt = (d, f, only = null) => {
  const at = bracket(d, f), points = d.radius.length
  const re = blend(d.motion_re, d.n_moving, at), im = blend(d.motion_im, d.n_moving, at)
  const field = { r_re: new Float64Array(points), r_im: new Float64Array(points), z_re: new Float64Array(points),
                  z_im: new Float64Array(points), largest: 0 }
  for (let k = 0; k < d.n_moving; k++) {
    if (only !== null && k !== only) continue
    const shape = k * points
    for (let p = 0; p < points; p++) {
      field.r_re[p] += re[k] * d.radial[shape + p]
      field.r_im[p] += im[k] * d.radial[shape + p]
      field.z_re[p] += re[k] * d.axial[shape + p]
      field.z_im[p] += im[k] * d.axial[shape + p]
    }
  }
  for (let p = 0; p < points; p++) {
    // Half axis of the ellipse the point runs through.
    const r2 = field.r_re[p] ** 2 + field.r_im[p] ** 2, z2 = field.z_re[p] ** 2 + field.z_im[p] ** 2
    const dr = field.r_re[p] ** 2 - field.r_im[p] ** 2 + field.z_re[p] ** 2 - field.z_im[p] ** 2
    const di = 2 * (field.r_re[p] * field.r_im[p] + field.z_re[p] * field.z_im[p])
    field.largest = Math.max(field.largest, Math.sqrt(0.5 * (r2 + z2 + Math.hypot(dr, di))))
  }
  return field
}

// Indices of the level's peaks and dips in the band that stand out by at least so many dB.
const turningPoints = (d, swing = 1) => {
  const inside = [...d.frequency.keys()].filter((i) => d.frequency[i] >= d.low && d.frequency[i] <= d.high)
  const peaks = [], dips = []
  let high = inside[0], low = inside[0], rising = 0
  for (const i of inside) {
    if (d.level[i] > d.level[high]) high = i
    if (d.level[i] < d.level[low]) low = i
    if (rising >= 0 && d.level[i] < d.level[high] - swing) {
      if (high !== inside[0]) peaks.push(high)
      rising = -1
      low = i
    } else if (rising <= 0 && d.level[i] > d.level[low] + swing) {
      if (low !== inside[0]) dips.push(low)
      rising = 1
      high = i
    }
  }
  return { peaks, dips }
}
// The mode of another design that is "the same": same kind, same count within it.
const sameMode = (d, chosen) => chosen && d ? d.modes.find((m) => m.kind === chosen.kind && m.rank === chosen.rank) : undefined
