// The slim header: names and actions, the file in and out, and the way of the Tab key through the controls.
const LARGEST_FILE = 65536

// Every element below a root that fits a selector, shadow roots included.
function deep(selector, root = document) {
  const found = [...root.querySelectorAll(selector)]
  for (const host of root.querySelectorAll("*")) {
    if (host.shadowRoot) { found.push(...deep(selector, host.shadowRoot)) }
  }
  return found
}

const is_text = (node) => node?.matches?.("input:not([type=range]):not([type=checkbox]):not([type=file]), textarea, select")

function make(tag, properties = {}, ...children) {
  const node = Object.assign(document.createElement(tag), properties)
  node.append(...children)
  return node
}

export function render({model, el}) {
  const send = (message) => model.send_msg(message)

  // ---- skip links
  const skip = make("nav", {className: "skip", ariaLabel: "Skip"})
  for (const [words, selector] of [["Controls", ".group .fold"], ["Plots", ".region-plots"], ["Modes", ".region-gallery"]]) {
    skip.append(make("button", {type: "button", textContent: `Skip to ${words.toLowerCase()}`, onclick: () => {
      const [target] = deep(selector)
      if (!target) { return }
      if (target.tabIndex < 0 && !target.hasAttribute("tabindex")) { target.tabIndex = -1 }
      target.focus()
      target.scrollIntoView({block: "nearest"})
    }}))
  }

  // ---- names
  const name = make("input", {className: "name", type: "text", spellcheck: false, maxLength: 100, ariaLabel: "Name of the design",
    title: "Name of the design"})
  name.addEventListener("change", () => send({rename: name.value}))
  name.addEventListener("keydown", (event) => { if (event.key === "Enter") { name.blur() } })
  const busy = make("span", {className: "busy", role: "status"})

  // ---- pages
  const tabs = make("nav", {className: "tabs", ariaLabel: "Pages"}, ...model.pages.map((page) => make("button", {
    type: "button", className: "tab", value: page, textContent: page[0].toUpperCase() + page.slice(1), onclick: () => send({page})})))

  // ---- actions
  const action = (words, about, run) => make("button", {type: "button", className: "action", textContent: words, title: about, onclick: run})
  const hold = action("hold", "Keep this design as the grey reference (key h)", () => send({act: "hold"}))
  const undo = action("undo", "One step back (Ctrl+Z, key u)", () => send({act: "undo"}))
  const redo = action("redo", "One step forward (Ctrl+Shift+Z, key r)", () => send({act: "redo"}))
  const file = make("input", {type: "file", accept: ".toml,text/plain", className: "file", tabIndex: -1, ariaLabel: "Design file"})
  const open = action("open", "Open a design file", () => file.click())
  const save = action("save", "Save this design as a file", () => send({act: "save"}))
  const link = action("link", "A link that opens this design", () => send({act: "link"}))
  const samples = make("select", {className: "action", ariaLabel: "Sample designs", title: "Open a sample design"})

  file.addEventListener("change", async () => {
    const [chosen] = file.files
    if (!chosen) { return }
    if (chosen.size > LARGEST_FILE) {
      send({too_large: chosen.size, file: chosen.name})
    } else {
      const bytes = new Uint8Array(await chosen.arrayBuffer())
      send({file: chosen.name, content: btoa(bytes.reduce((text, byte) => text + String.fromCharCode(byte), ""))})
    }
    file.value = ""
  })
  samples.addEventListener("change", () => {
    if (samples.value) { send({sample: samples.value}) }
    samples.value = ""
  })

  // ---- a link to copy
  const address = make("input", {type: "text", readOnly: true, ariaLabel: "Link to this design"})
  const copied = make("span", {role: "status"})
  const close = make("button", {type: "button", className: "action", textContent: "close", onclick: () => { share.hidden = true; link.focus() }})
  const share = make("div", {className: "share", hidden: true}, address, copied, close)
  share.addEventListener("keydown", (event) => { if (event.key === "Escape") { close.click() } })
  async function show_link(query) {
    const url = new URL(window.location.href)
    url.search = query
    history.replaceState(null, "", url)
    address.value = url.href
    share.hidden = false
    address.focus()
    address.select()
    copied.textContent = "Copy it from here."
    if (navigator.clipboard) {
      try {
        await navigator.clipboard.writeText(url.href)
        copied.textContent = "Copied."
      } catch (error) {
        if (error.name !== "NotAllowedError") { throw error }
      }
    }
  }
  function download({text, filename}) {
    const url = URL.createObjectURL(new Blob([text], {type: "application/toml"}))
    make("a", {href: url, download: filename}).click()
    setTimeout(() => URL.revokeObjectURL(url), 1000)
  }
  model.on("msg:custom", (message) => {
    if (message.link) { show_link(message.link) }
    if (message.address) {
      const url = new URL(window.location.href)
      url.searchParams.set("d", message.address)
      history.replaceState(null, "", url)
    }
    if (message.download) { download(message.download) }
  })

  // ---- keys
  // Tab stops once at each group: its heading. Arrow down enters; up and down move from entry to entry; Tab goes on to the
  // entry's slider, then to the next heading.
  function tab(path) {
    const passed = deep(".field").filter((field) => !path.includes(field))
    for (const field of passed) { field.inert = true }
    setTimeout(() => { for (const field of passed) { field.inert = false } }, 0)
  }
  function step(path, event) {
    const group = path.find((node) => node.shadowRoot && node.classList.contains("group"))
    const target = path[0]
    if (!group || !(target.matches?.(".fold") || is_text(target)) || target.matches("select")) { return }
    const heading = deep(".fold", group.shadowRoot)[0]
    const entries = deep(".field", group.shadowRoot).filter((field) => field.offsetParent !== null)
      .map((field) => field.querySelector("input, select"))
    const stops = [heading, ...entries]
    if (target === heading && event.key === "ArrowDown" && heading.getAttribute("aria-expanded") === "false") { heading.click() }
    const next = stops[stops.indexOf(target) + (event.key === "ArrowDown" ? 1 : -1)]
    if (next) {
      event.preventDefault()
      event.stopPropagation()
      next.focus()
      next.select?.()
    }
  }
  function on_key(event) {
    const path = event.composedPath()
    const plain = !event.ctrlKey && !event.metaKey && !event.altKey
    if (event.key === "Tab") { tab(path) }
    if (plain && (event.key === "ArrowDown" || event.key === "ArrowUp")) { step(path, event) }
    if (is_text(path[0])) { return }
    if ((event.ctrlKey || event.metaKey) && !event.altKey && event.key.toLowerCase() === "z") {
      event.preventDefault()
      send({act: event.shiftKey ? "redo" : "undo"})
    }
  }
  document.addEventListener("keydown", on_key, true)
  model.on("remove", () => document.removeEventListener("keydown", on_key, true))

  // ---- what the server says
  const show = () => {
    if (el.getRootNode().activeElement !== name && name.getRootNode().activeElement !== name) { name.value = model.design_name }
    document.title = `${model.design_name} · ${model.product}`
    hold.setAttribute("aria-pressed", String(model.held))
    hold.textContent = model.held ? "let go" : "hold"
    undo.disabled = !model.can_undo
    redo.disabled = !model.can_redo
    save.textContent = model.dirty ? "save •" : "save"
    save.setAttribute("aria-label", model.dirty ? "save, changed since the file" : "save")
    busy.textContent = model.busy ? "computing" : ""
    for (const tab of tabs.children) {
      if (tab.value === model.page) { tab.setAttribute("aria-current", "page") } else { tab.removeAttribute("aria-current") }
    }
  }
  samples.append(make("option", {value: "", textContent: "samples"}),
    ...model.samples.map(([value, words]) => make("option", {value, textContent: words})))
  for (const property of ["design_name", "held", "can_undo", "can_redo", "dirty", "busy", "page"]) { model.on(property, show) }
  show()

  const bar = make("div", {className: "bar"},
    make("span", {className: "product", textContent: model.product}), tabs, name, busy, make("span", {className: "space"}),
    hold, undo, redo, open, save, link, samples, file)
  return make("div", {className: "header"}, skip, bar, share)
}
