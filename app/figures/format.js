// Numbers in words, as app/theme.py writes them.
const digits = (value, significant = 3) => {
  if (!Number.isFinite(value)) return "–"
  if (value === 0) return "0"
  const rounded = Number(value.toPrecision(significant))
  const places = Math.max(0, significant - 1 - Math.floor(Math.log10(Math.abs(rounded))))
  const text = rounded.toFixed(Math.min(places, 12))
  return (text.includes(".") ? text.replace(/0+$/, "").replace(/\.$/, "") : text).replace("-", "−")
}
const hertz = (f) => f < 1000 ? `${digits(f)} Hz` : f < 9999.5 ? `${f.toFixed(0)} Hz` : `${digits(f / 1000)} kHz`
const bareHertz = (f) => f < 9999.5 ? f.toFixed(0) : `${digits(f / 1000)}k`
const PREFIXES = [[1, ""], [1e-3, "m"], [1e-6, "µ"], [1e-9, "n"]]
const quantity = (value, unit, significant = 2) => {
  if (value === 0 || !Number.isFinite(value)) return `${digits(value)} ${unit}`
  const size = Math.abs(Number(value.toPrecision(significant)))
  const [factor, prefix] = PREFIXES.find(([f]) => size >= f) ?? PREFIXES[3]
  return `${digits(value / factor, significant)} ${prefix}${unit}`
}
const percent = (ratio) => {
  const value = 100 * ratio
  if (value > 0 && value < 0.1) return "under 0.1 %"
  return value >= 9.95 ? `${value.toFixed(0)} %` : `${digits(value, 2)} %`
}
// The largest of 1, 1.5, 2, 2.5, 3, 4, 5, 6, 8 times a power of ten that is not above value.
const roundDown = (value) => {
  const power = 10 ** Math.floor(Math.log10(value))
  const step = [8, 6, 5, 4, 3, 2.5, 2, 1.5, 1].find((s) => s * power <= value * (1 + 1e-9))
  return (step ?? 1) * power
}
const KIND_ROLE = { "pumping": "pumping", "transverse": "transverse", "in-plane": "in_plane" }
// Line styles of the kinds: heavy, fine, dotted.
const KIND_DASH = { "pumping": [], "transverse": [], "in-plane": [2, 2.5] }
const KIND_WIDTH = { "pumping": 3, "transverse": 1.6, "in-plane": 2 }
const textWidth = (text, px = 11) => 0.56 * px * text.length

// Replace a source's data only where they differ: every replacement has its glyphs measured and painted anew.
const put = (source, data) => {
  const same = (a, b) => a.length === b.length &&
    Array.prototype.every.call(a, (v, i) => v === b[i] || (Array.isArray(v) && Array.isArray(b[i]) && same(v, b[i])))
  if (!Object.keys(data).every((name) => name in source.data && same(data[name], source.data[name]))) source.data = data
}
