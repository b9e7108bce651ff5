// One plain sentence about the cursor's frequency.
const modeName = (d, row) => {
  if (row < d.n_shown) {
    const { frequency, kind } = d.modes[row]
    return `the ${hertz(frequency)} ${kind === "transverse" ? "film" : kind} mode`
  }
  return row === d.n_rows - 1 ? "the residual" : "the other modes together"
}

// What the cursor stands on: "peak", "dip" or "", within half a percent of frequency or one grid point.
const standsOn = (d, turns, f) => {
  const i = nearest(d, f)
  const near = (k) => Math.abs(k - i) <= 1 || Math.abs(Math.log(d.frequency[k] / f)) < 0.005
  return turns.peaks.some(near) ? "peak" : turns.dips.some(near) ? "dip" : ""
}

// Rows by their part of the total along its phase, largest first, and the strongest pair that works against each other.
const ranked = (p) => {
  const along = Array.from(p.re, (r, k) => p.heard > 0 ? (r * p.total[0] + p.im[k] * p.total[1]) / p.heard ** 2 : 0)
  const order = [...along.keys()].sort((a, b) => along[b] - along[a])
  const first = [...p.size.keys()].reduce((a, b) => p.size[b] > p.size[a] ? b : a, 0)
  const against = (k) => -(p.re[k] * p.re[first] + p.im[k] * p.im[first])
  const second = [...p.size.keys()].reduce((a, b) => against(b) > against(a) ? b : a, first)
  return { along, order, pair: [first, second].sort((a, b) => a - b) }
}

const sentence = (d, turns, f) => {
  const p = pressuresAt(d, f), where = standsOn(d, turns, f)
  if (p.made === 0) return `At ${hertz(f)}: nothing moves, nothing is heard.`
  const { along, order, pair } = ranked(p)
  const [lead, next] = order
  const heard = `${percent(p.survival)} of what the motions make is heard`
  const names = pair.map((row) => modeName(d, row))
  const two = pair[0] !== pair[1] && p.survival < 0.5
  let text
  if (where === "dip" && two) text = `${names[0]} and ${names[1]} cancel`
  else if (where === "dip") text = `little moves: the dip is a lack of motion, not a cancellation`
  else if (where === "peak" && along[lead] > 0.6) text = `${modeName(d, lead)} makes the peak`
  else if (where === "peak") text = `${modeName(d, lead)} and ${modeName(d, next)} make the peak together`
  else if (two) text = `${names[0]} and ${names[1]} work against each other`
  else if (along[lead] > 0.6) text = `${modeName(d, lead)} makes most of the sound`
  else text = `${modeName(d, lead)} and ${modeName(d, next)} make most of the sound`
  const estimate = f >= d.estimate_above ? " (an estimate here: cone depth)" : ""
  return `At ${hertz(f)}: ${text}; ${heard}${estimate}.`
}
