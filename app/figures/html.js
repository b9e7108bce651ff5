// Views of models, and the words beside the plots.
const viewOf = (model) => Bokeh.index.find_one(model)
const onScreen = (plot) => (viewOf(plot)?.el.getClientRects().length ?? 0) > 0
// Words in the HTML beside the plots are written straight into it: changing a Div's text instead would have Bokeh build
// and lay out much of the page anew. Only where a height changes the plots must take their new places; the browser says so
// by itself, so that nothing is measured, and laid out for it, while words are written.
// The sentence keeps the height it once had, so that the plots do not jump as it turns from one line to two.
const KEEPS_HEIGHT = ["sentence"]
const heights = new ResizeObserver((entries) => {
  for (const { target } of entries) {
    const { model, key, height, width } = target.elastovox
    const now = target.offsetHeight, wide = target.offsetWidth
    Object.assign(target.elastovox, { height: now, width: wide })
    if (KEEPS_HEIGHT.includes(key)) target.style.minHeight = wide === width ? `${now}px` : ""
    if (now !== height) viewOf(model)?.invalidate_layout()
  }
})
const write = (model, key, change) => {
  let element = model.elastovox_words?.[key]
  if (!element?.isConnected) {
    element = viewOf(model)?.shadow_el.querySelector(`[data-word="${key}"]`)
    if (!element) return
    model.elastovox_words = { ...model.elastovox_words, [key]: element }
    element.elastovox = { model, key, height: element.offsetHeight, width: element.offsetWidth }
    heights.observe(element)
  }
  change(element)
}
const setWord = (model, key, text, hidden = false) => write(model, key, (element) => {
  if (element.textContent !== text) element.textContent = text
  if (element.hidden !== hidden) element.hidden = hidden
})
// HTML made by the server, where everything that came from a user was escaped.
const setHtml = (model, key, html) => write(model, key, (element) => {
  if (element.elastovox.html === html) return
  element.elastovox.html = html
  element.innerHTML = html
})
