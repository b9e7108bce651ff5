// One group of controls: a heading that folds, and per field a label, an entry or choice, a slider, the meaning, a message.
function make(tag, properties = {}, ...children) {
  const node = Object.assign(document.createElement(tag), properties)
  node.append(...children)
  return node
}

// The way to the server and back, one for the page. Moves go out together, the newest of each control, as soon as the
// ones before were answered; an answer says what groups of controls show.
const PATIENCE = 1000       // ms an answer is waited for
const EVERY = 40            // ms between two messages: more than anyone can see, and the server has others to serve
function theLine() {
  const document = window.Bokeh.documents[0]
  const asked = document.get_model_by_name("asked"), answers = document.get_model_by_name("answers")
  if (!asked || !answers) return null
  if (answers.line) return answers.line
  const line = answers.line = {pending: new Map(), out: null, last: 0, count: 0, groups: new Map(), latest: {}}
  const go = () => {
    clearTimeout(line.out)
    line.out = null
    if (line.pending.size === 0) return
    const early = line.last + EVERY - performance.now()
    if (early > 0) {
      line.out = setTimeout(go, early)
      return
    }
    line.last = performance.now()
    const moves = [...line.pending.values()]
    line.pending.clear()
    line.out = setTimeout(go, PATIENCE)
    line.count += 1
    asked.data = {json: [JSON.stringify({moves})], count: [`moves ${line.count}`]}
  }
  line.send = (move) => {
    line.pending.set(`${move.group}.${move.name}`, move)
    if (line.out === null) go()
  }
  answers.connect(answers.properties.data.change, () => {
    const {shown, answered} = JSON.parse(answers.data.json[0])
    for (const [group, now] of Object.entries(shown)) {
      line.latest[group] = now
      line.groups.get(group)?.(now)
    }
    if (answered) go()
  })
  return line
}

// The inputs of one field; `move` sends what a person did, `show` shows what the server says.
const kinds = {
  number(spec, id, move) {
    const entry = make("input", {type: "text", id, className: "entry", autocomplete: "off", spellcheck: false})
    const slider = make("input", {type: "range", className: "slider", min: spec.start, max: spec.end, step: spec.step,
      ariaLabel: spec.label})
    const fill = () => slider.style.setProperty("--fill", `${100 * (slider.value - spec.start) / (spec.end - spec.start)}%`)
    slider.setAttribute("role", "slider")
    slider.addEventListener("input", () => { fill(); move({place: slider.valueAsNumber, released: false}) })
    slider.addEventListener("change", () => move({place: slider.valueAsNumber, released: true}))
    typed(entry, (text) => move({text, released: true}))
    const show = ({text, place}, newest) => {
      if (!entry.editing) { entry.value = text }
      slider.setAttribute("aria-valuetext", text)
      if (newest) { slider.value = place; fill() }
    }
    return {described: [entry, slider], nodes: [entry, slider], show}
  },
  list(spec, id, move) {
    const entry = make("input", {type: "text", id, className: "entry", placeholder: "none", autocomplete: "off", spellcheck: false})
    typed(entry, (text) => move({text, released: true}))
    return {described: [entry], nodes: [entry], show({text}) { if (!entry.editing) { entry.value = text } }}
  },
  choice(spec, id, move) {
    const options = spec.options.map((value) => make("option", {value, textContent: value}))
    const choice = make("select", {id, className: "choice"}, ...options)
    choice.addEventListener("change", () => move({value: choice.value, released: true}))
    return {described: [choice], nodes: [choice], show({value}) { choice.value = value }}
  },
  flag(spec, id, move) {
    const flag = make("input", {type: "checkbox", id, className: "flag"})
    flag.setAttribute("role", "switch")
    flag.addEventListener("change", () => move({value: flag.checked, released: true}))
    return {described: [flag], nodes: [flag], show({value}) { flag.checked = value }}
  },
  band(spec, id, move) {
    const entry = make("input", {type: "text", id, className: "entry", autocomplete: "off", spellcheck: false})
    const options = spec.options.map((value) => make("option", {value, textContent: value}))
    const usual = make("select", {className: "usual", ariaLabel: "Usual bands"}, make("option", {value: "", textContent: "typed"}), ...options)
    typed(entry, (text) => move({text, released: true}))
    usual.addEventListener("change", () => { if (usual.value) { move({text: usual.value, released: true}) } })
    const show = ({text}) => {
      if (!entry.editing) { entry.value = text }
      usual.value = spec.options.includes(text) ? text : ""
    }
    return {described: [entry, usual], nodes: [entry, usual], show}
  },
}
kinds.count = kinds.number

// Send a typed text on Enter or when the focus leaves; Escape takes the typing back.
function typed(entry, send) {
  let before = ""
  const end = () => { entry.editing = false }
  entry.addEventListener("focus", () => { before = entry.value })
  entry.addEventListener("input", () => { entry.editing = true })
  entry.addEventListener("change", () => { end(); send(entry.value); before = entry.value })
  entry.addEventListener("keydown", (event) => {
    if (event.key === "Escape") { entry.value = before; end() }
  })
}

export function render({model}) {
  let n = 0
  const fields = new Map()
  const body = make("div", {className: "body", id: "body"})

  for (const spec of model.fields) {
    const last = {n: 0}
    const move = (what) => {
      n += 1
      last.n = n
      theLine().send({group: model.group, name: spec.name, n, ...what})
    }
    const id = `entry-${spec.name}`
    const input = kinds[spec.kind](spec, id, move)
    const meaning = make("p", {className: "meaning", id: `meaning-${spec.name}`, textContent: spec.meaning})
    const message = make("p", {className: "message", id: `message-${spec.name}`})
    message.setAttribute("role", "alert")
    const caution = make("p", {className: "caution"})
    const words = spec.kind === "band" ? "field field-band" : `field field-${model.group}-${spec.name}`
    const field = make("div", {className: `${words} kind-${spec.kind}`},
      make("label", {htmlFor: id, textContent: spec.label}), ...input.nodes, caution, message, meaning)
    for (const node of input.described) { node.setAttribute("aria-describedby", `${meaning.id} ${message.id}`) }
    // the meaning, after a moment under the pointer
    let wait = null
    field.addEventListener("pointerenter", () => { wait = setTimeout(() => field.classList.add("explained"), 700) })
    const hide = () => { clearTimeout(wait); field.classList.remove("explained") }
    for (const kind of ["pointerleave", "pointerdown", "input"]) { field.addEventListener(kind, hide) }
    field.addEventListener("keydown", (event) => { field.classList.toggle("quiet", event.key === "Escape") })
    body.append(field)
    fields.set(spec.name, {field, input, caution, message, last})
  }

  const fold = make("button", {type: "button", className: "fold", textContent: model.title, title: "Arrow down: into this group"})
  fold.setAttribute("aria-controls", "body")
  fold.addEventListener("click", () => { model.open = !model.open })
  const show_fold = () => {
    fold.setAttribute("aria-expanded", String(model.open))
    body.hidden = !model.open
  }
  const show = (shown) => {
    for (const [name, now] of Object.entries(shown)) {
      const {field, input, caution, message, last} = fields.get(name)
      field.hidden = now.hidden
      field.classList.toggle("wrong", now.message !== "")
      if (message.textContent !== now.message) { message.textContent = now.message }
      if (caution.textContent !== (now.caution ?? "")) { caution.textContent = now.caution ?? "" }
      for (const node of input.described) { node.setAttribute("aria-invalid", String(now.message !== "")) }
      input.show(now, now.n >= last.n)
    }
  }
  model.on("open", show_fold)
  model.on("shown", () => show(model.shown))
  show_fold()
  const line = theLine()
  line?.groups.set(model.group, show)
  show(line?.latest[model.group] ?? model.shown)
  return make("section", {}, make("h2", {}, fold), body)
}
