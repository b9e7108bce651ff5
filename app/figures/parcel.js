// What the server packed (app/wire.py), put where it belongs.
const unpackColumn = (column, floats, image) => {
  if (Array.isArray(column)) return column
  if (column.each) return column.each.map((each) => unpackColumn(each, floats, image))
  const numbers = new Float32Array(floats.buffer, floats.byteOffset + 4 * column.at, column.n)
  return column.shape ? new image(numbers, column.shape) : numbers
}

// Puts a parcel into the page's models; none of it goes back to the server.
const openParcel = (page) => {
  const { m } = page, { json, floats, count } = m.parcel.data, document = m.parcel.document
  if (count.length === 0) return
  const image = m.share_legend.data.image[0].constructor          // Bokeh's own array with a shape
  for (const [id, values] of Object.entries(JSON.parse(json[0]))) {
    if (values.data) {
      values.data = Object.fromEntries(Object.entries(values.data).map(([name, column]) => [name, unpackColumn(column, floats[0], image)]))
    }
    document.get_model_by_id(id)?.setv(values, { sync: false })
  }
  requestAnimationFrame(() => requestAnimationFrame(() => ask(page, { painted: count[0] })))
}

// One message to the server.
const ask = (page, words) => {
  page.asked_count = (page.asked_count ?? 0) + 1
  page.m.asked.data = { json: [JSON.stringify(words)], count: [page.asked_count] }
}
