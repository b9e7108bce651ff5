// Saving a plot: picture as drawn, or the numbers behind it.
const download = (blob, name) => {
  const link = document.createElement("a")
  link.href = URL.createObjectURL(blob)
  link.download = name
  link.click()
  setTimeout(() => URL.revokeObjectURL(link.href), 10000)
}
const csv = (columns) => {
  const names = Object.keys(columns), n = columns[names[0]].length
  const lines = Array.from({ length: n }, (_, i) => names.map((name) => columns[name][i]).join(","))
  return [names.join(","), ...lines].join("\r\n") + "\r\n"
}
const rowName = (d, row) => row < d.n_shown ? `${bareHertz(d.modes[row].frequency)}_Hz` : row === d.n_rows - 1 ? "residual" : "others"

const NUMBERS = {
  level: ({ now, m }) => ({ frequency_Hz: now.frequency, level_dB_re_20uPa: now.level, survival: m.level.data.survival }),
  share: ({ now }) => {
    const at = Array.from({ length: now.n }, (_, i) => pressuresAt(now, now.frequency[i]))
    const columns = { frequency_Hz: now.frequency }
    for (let row = 0; row < now.n_rows; row++) {
      columns[`share_${row + 1}_${rowName(now, row)}`] =
        at.map((p) => p.heard * p.made > 0 ? (p.re[row] * p.total[0] + p.im[row] * p.total[1]) / (p.heard * p.made) : 0)
    }
    return columns
  },
  phasor: ({ now, m, f }) => ({
    mode: m.phasor.data.x0.map((_, row) => rowName(now, row)), cursor_Hz: m.phasor.data.x0.map(() => f),
    pressure_Pa: m.phasor.data.magnitude, phase_to_total_rad: m.phasor.data.phase,
  }),
  section: ({ now, moving }) => ({
    radius_m: now.radius, height_m: now.height, radial_re_m: moving.field.r_re, radial_im_m: moving.field.r_im,
    axial_re_m: moving.field.z_re, axial_im_m: moving.field.z_im,
  }),
  gallery: ({ now }) => {
    const rows = now.modes.flatMap((mode) => Array.from(now.radius, (radius, p) => ({ mode, radius, at: mode.shape * now.radius.length + p })))
    return {
      frequency_Hz: rows.map((r) => r.mode.frequency), kind: rows.map((r) => r.mode.kind),
      damping_ratio: rows.map((r) => r.mode.damping), share_of_band: rows.map((r) => r.mode.share),
      radius_m: rows.map((r) => r.radius), radial: rows.map((r) => now.radial[r.at]), axial: rows.map((r) => now.axial[r.at]),
    }
  },
}
const save = async (page, plot, form) => {
  if (!page.now) return
  const name = `${page.now.stem}-${plot}.${form}`
  if (form === "csv") return download(new Blob([csv(NUMBERS[plot](page))], { type: "text/csv" }), name)
  download(await viewOf(page.m[`${plot}_plot`]).export(form, true).to_blob(), name)
}
