// One plain sentence about the cursor's frequency.
const kindWord = (kind) => kind === "transverse" ? "film" : kind
const modeName = (d, row) => row < d.n_shown ? `the ${hertz(d.modes[row].frequency)} ${kindWord(d.modes[row].kind)} mode`
  : row === d.n_rows - 1 ? "the residual" : "the other modes together"
const twoNames = (d, [first, second]) => {
  const a = d.modes[first], b = d.modes[second]
  return a && b && a.kind === b.kind
    ? `the ${hertz(a.frequency)} and the ${hertz(b.frequency)} ${kindWord(a.kind)} modes`
    : `${modeName(d, first).replace(/ mode$/, "")} and ${modeName(d, second)}`
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
  const two = pair[0] !== pair[1] && p.survival < 0.5
  let text
  if (where === "dip" && two) text = `${twoNames(d, pair)} cancel`
  else if (where === "dip") text = `little moves: the dip is a lack of motion, not a cancellation`
  else if (where === "peak" && along[lead] > 0.6) text = `${modeName(d, lead)} makes the peak`
  else if (where === "peak") text = `${twoNames(d, [lead, next])} make the peak together`
  else if (two) text = `${twoNames(d, pair)} work against each other`
  else if (along[lead] > 0.6) text = `${modeName(d, lead)} makes most of the sound`
  else text = `${twoNames(d, [lead, next])} make most of the sound`
  const estimate = f >= d.estimate_above ? " (estimate)" : ""
  return `At ${hertz(f)}: ${text}; ${heard}${estimate}.`
}
