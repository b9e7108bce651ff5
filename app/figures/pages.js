// What other pages' scripts share with the first one's.
// The cursor follows the pointer in another page's plot over frequency, and its arrow keys.
const followPointer = (page, plot, el) => {
  el.style.cursor = "crosshair"
  const move = (event) => {
    const { start, end } = plot.x_range
    toNearest(page, 10 ** (start + Math.min(Math.max(pointed(plot, event).part, 0), 1) * (end - start)))
  }
  el.addEventListener("pointerdown", (event) => {
    if (event.button !== 0) return
    el.setPointerCapture(event.pointerId)
    move(event)
  })
  el.addEventListener("pointermove", (event) => { if (el.hasPointerCapture(event.pointerId)) move(event) })
  el.addEventListener("keydown", (event) => {
    const way = SIDEWAYS[event.key]
    if (!way || event.ctrlKey || event.metaKey || event.altKey) return
    event.preventDefault()
    event.stopPropagation()
    stepCursor(page, way, event.shiftKey ? 20 : 1)
  })
}
// Makes another page's plots (name -> what they are) part of this one: focus, words, save menus, and a drawing after each
// layout, which it returns; `dress` is called once for each plot's element.
const place = (page, m, said, draw, dress) => {
  const dressed = new WeakSet()
  const laidOut = () => {
    for (const name of Object.keys(said)) {
      const view = viewOf(m[name])
      if (!view || dressed.has(view.el)) continue
      dressed.add(view.el)
      restCopies(view)
      view.el.tabIndex = 0
      view.el.setAttribute("aria-label", said[name])
      dress(m[name], view.el, name)
    }
    draw()
  }
  for (const name of Object.keys(said)) {
    const { inner_width, inner_height } = m[name].properties
    m[name].connect(inner_width.change, laidOut)
    m[name].connect(inner_height.change, laidOut)
    page.m[name] = m[name]
    page.own.push(m[name.replace("_plot", "_menu")])
  }
  return laidOut
}

const TOOLS = { ACTIONS, NUMBERS, ask, bracket, digits, followPointer, hertz, onScreen, percent, place, pointed, put, setHtml, textWidth }
