// Listening: choose a signal, have it rendered, switch between its versions while they play.
const RAMP = 0.01           // s in which one version gives way to another
const SOON = 0.03           // s from now at which a source can begin on time
const PATIENCE = 2000       // ms a sound output is waited for
const LEAD = 0.1            // s from the press of play to the sound: all sources are ready by then

function make(tag, properties = {}, ...children) {
  const node = Object.assign(document.createElement(tag), properties)
  node.append(...children)
  return node
}

function write(node, text) {
  if (node.textContent !== text) { node.textContent = text }
}

// All versions of a clip, played in step; one is heard. `changed` is called when the sound begins or ends,
// `failed` when there is no output.
function player(changed, failed) {
  const buffers = new Map(), running = new Map()
  let context = null, begun = 0, loop = false, gains = {}, heard = ""

  const glide = (gain, target) => {
    const now = context.currentTime
    gain.gain.cancelScheduledValues(now)
    gain.gain.setValueAtTime(gain.gain.value, now)
    gain.gain.linearRampToValueAtTime(target, now + RAMP)
  }
  const level = (version) => version === heard ? gains[version] ?? 0 : 0
  const mix = () => { for (const [version, {gain}] of running) { glide(gain, level(version)) } }
  const start = (version) => {
    const gain = context.createGain(), source = context.createBufferSource(), buffer = buffers.get(version)
    const at = Math.max(context.currentTime + SOON, begun)
    gain.gain.value = 0
    source.buffer = buffer
    source.loop = loop
    source.connect(gain).connect(context.destination)
    source.onended = () => { if (running.get(version)?.source === source) { stop() } }
    source.start(at, (at - begun) % buffer.duration)
    running.set(version, {gain, source})
  }
  const stop = () => {
    for (const {gain, source} of running.values()) {
      source.onended = () => gain.disconnect()
      glide(gain, 0)
      source.stop(context.currentTime + 2 * RAMP)
    }
    running.clear()
    setTimeout(() => { if (running.size === 0) { context?.suspend() } }, 100)
    changed()
  }
  return {
    playing: () => running.size > 0,
    has: (version) => buffers.has(version),
    async play() {
      context ??= new AudioContext({latencyHint: "interactive"})
      const awake = context.resume().then(() => true)
      if (!await Promise.race([awake, new Promise((done) => setTimeout(done, PATIENCE))])) {
        failed()
        return
      }
      if (running.size > 0) { return }
      begun = context.currentTime + LEAD
      for (const version of buffers.keys()) { start(version) }
      mix()
      changed()
    },
    stop,
    hear(version) { heard = version; mix() },
    weigh(factors) { gains = factors; mix() },
    repeat(on) {
      loop = on
      for (const {source} of running.values()) { source.loop = on }
    },
    take(version, samples, rate) {
      const buffer = new AudioBuffer({length: samples.length, sampleRate: rate})
      buffer.copyToChannel(samples, 0)
      buffers.set(version, buffer)
      if (running.size > 0) { start(version) }
    },
    clear() {
      const was = running.size > 0
      if (was) { stop() }
      buffers.clear()
      return was
    },
    close() {
      if (running.size > 0) { stop() }
      context?.close()
      context = null
    },
  }
}

const hertz = (f) => `${Number(f.toPrecision(4))} Hz`

function save({filename, bytes}) {
  const url = URL.createObjectURL(new Blob([bytes], {type: "audio/wav"}))
  make("a", {href: url, download: filename}).click()
  setTimeout(() => URL.revokeObjectURL(url), 1000)
}

export function render({model}) {
  const send = (message) => model.send_msg(message)
  const [lowest, highest] = model.tones
  const sound = player(() => show_play(),
    () => write(fault, "The browser gives no sound output. Connect one, then press play again."))
  let shown = null, heard = 0, chosen = model.versions[0][0]

  // ---- the signal
  const signal = make("select", {id: "signal", className: "signal"},
    ...model.signals.map(([value]) => make("option", {value, textContent: value})))
  const entries = ["frequency", "second frequency"].map((words, place) => {
    const entry = make("input", {type: "text", id: `frequency-${place}`, className: "entry", autocomplete: "off", spellcheck: false,
      title: `${lowest} Hz to ${highest / 1000} kHz; empty: at the cursor`})
    entry.addEventListener("input", () => { entry.own = entry.value.trim() !== "" })
    entry.addEventListener("change", () => { if (!entry.own) { follow() } })
    entry.addEventListener("keydown", (event) => { if (event.key === "Enter") { ask() } })
    return {entry, row: make("div", {className: "line"}, make("label", {htmlFor: entry.id, textContent: words}), entry)}
  })
  const cursor = window.Bokeh.documents[0]?.get_model_by_name("cursor")
  const follow = () => {
    const at = cursor?.data.frequency[0] ?? model.cursor ?? 440
    const values = [at, 8 * at > highest ? at / 8 : 8 * at]
    entries.forEach(({entry}, place) => {
      if (!entry.own) { entry.value = hertz(Math.min(Math.max(values[place], lowest), highest)) }
    })
  }
  const file = make("input", {type: "file", id: "wav", accept: ".wav,audio/wav,audio/x-wav", className: "file"})
  const file_words = make("span", {className: "quiet", role: "status", textContent: "WAV, up to 30 s"})
  const own = make("div", {className: "own"}, make("label", {htmlFor: "wav", textContent: "file", className: "hidden"}), file, file_words)
  const fault = make("p", {className: "message", role: "alert"})

  // ---- the file, a piece after the other as the server asks for them
  let under_way = null
  async function send_piece(at) {
    const source = under_way
    const bytes = new Uint8Array(await source.slice(at, at + model.piece).arrayBuffer())
    if (source !== under_way) { return }
    let text = ""
    for (let i = 0; i < bytes.length; i += 8192) { text += String.fromCharCode(...bytes.subarray(i, i + 8192)) }
    send({piece: {name: source.name, size: source.size, at, content: btoa(text)}})
  }
  file.addEventListener("change", () => {
    [under_way] = file.files
    if (!under_way) { return }
    write(fault, "")
    write(file_words, "reading")
    send_piece(0)
  })
  const uploaded = ({at, clip, fault: why}) => {
    if (at !== undefined) {
      if (under_way) {
        write(file_words, `${Math.round(100 * at / under_way.size)} % sent`)
        send_piece(at)
      }
      return
    }
    under_way = null
    if (why) { file.value = "" }
    write(file_words, clip ?? "WAV, up to 30 s")
    write(fault, why ?? "")
  }

  // ---- rendering
  const go = make("button", {type: "button", className: "go"})
  const bar = make("progress", {max: 1, ariaLabel: "Rendering"})
  const left = make("span", {className: "quiet"})
  const working = make("div", {className: "working", hidden: true}, bar, left)
  const said = make("p", {className: "said", role: "status"})
  const stale = make("p", {className: "stale", role: "status"})
  const ask = () => {
    follow()
    write(fault, "")
    send({render: {signal: signal.value, frequencies: entries.map(({entry}) => entry.value), first: chosen}})
  }
  go.addEventListener("click", () => { if (shown?.working) { send({stop: true}) } else { ask() } })

  // ---- the versions
  const rows = new Map(model.versions.map(([name, words]) => {
    const radio = make("input", {type: "radio", name: "version", value: name, id: `version-${name}`})
    const level = make("span", {className: "number"}), gain = make("span", {className: "number"})
    const why = make("p", {className: "why", id: `why-${name}`})
    radio.setAttribute("aria-describedby", why.id)
    radio.addEventListener("change", () => { choose(name) })
    const label = make("label", {htmlFor: radio.id, textContent: words})
    return [name, {radio, level, gain, why, node: make("div", {className: "version"}, radio, label, level, gain, why)}]
  }))
  const choose = (name) => {
    chosen = name
    rows.get(name).radio.checked = true
    sound.hear(name)
    if (shown?.rows[name].state === "waiting") { send({first: name}) }
    show_play()
  }
  const versions = make("fieldset", {className: "versions"}, make("legend", {textContent: "versions", className: "hidden"}),
    make("div", {className: "heads", ariaHidden: "true"}, make("span"), make("span"), make("span", {textContent: "level"}),
      make("span", {textContent: "gain"})), ...[...rows.values()].map(({node}) => node))

  // ---- playing
  const play = make("button", {type: "button", className: "play"})
  const loop = make("input", {type: "checkbox", id: "loop"})
  const keep = make("button", {type: "button", className: "keep", textContent: "download",
    title: "The chosen version as a WAV file; its full scale in pascals is in the name"})
  play.addEventListener("click", () => { if (sound.playing()) { sound.stop() } else { sound.play() } })
  loop.addEventListener("change", () => sound.repeat(loop.checked))
  keep.addEventListener("click", () => send({download: chosen}))
  const show_play = () => {
    write(play, sound.playing() ? "stop" : "play")
    play.disabled = !sound.playing() && !sound.has(chosen)
    keep.disabled = !sound.has(chosen)
  }

  // ---- what the server says
  const states = {waiting: "waiting", working: "rendering"}
  const show_rows = () => {
    for (const [name, {radio, level, gain, why, node}] of rows) {
      const row = shown?.rows[name] ?? {state: "none"}
      const no_tone = row.state === "none" && name === "compensated" && signal.value !== "tone"
      radio.disabled = (row.state === "unavailable" || no_tone) && !sound.has(name)
      node.classList.toggle("off", radio.disabled)
      write(level, row.level ?? states[row.state] ?? "")
      write(gain, row.gain ?? "")
      write(why, row.why || (no_tone ? model.for_a_tone : ""))
    }
    if (rows.get(chosen).radio.disabled) {
      choose([...rows].find(([, {radio}]) => !radio.disabled)?.[0] ?? model.versions[0][0])
    }
  }
  const show_signal = () => {
    const [, number] = model.signals.find(([name]) => name === signal.value)
    entries.forEach(({row}, place) => { row.hidden = place >= number })
    own.hidden = signal.value !== model.own
    write(fault, "")
    show_rows()
  }
  const show = (now) => {
    shown = now
    if (heard !== now.heard) {
      heard = now.heard
      sound.clear()
    }
    sound.weigh(now.gains)
    write(go, now.working ? "stop rendering" : "render")
    working.hidden = !now.working
    if (now.working) {
      bar.value = now.working.part
      write(left, [`${Math.round(100 * now.working.part)} %`, now.working.left].filter(Boolean).join(", "))
    }
    write(said, now.working ? `Rendering ${now.working.version}: ${now.rendered}` : now.rendered && `Rendered: ${now.rendered}`)
    write(stale, now.stale ? "Rendered for an earlier design." : "")
    write(matched, now.matched)
    show_rows()
    show_play()
  }
  const take = ({batch, version, rate, samples}) => {
    const was = heard !== batch && sound.clear()
    heard = batch
    sound.take(version, samples, rate)
    if (was) { sound.play() }
  }
  model.on("msg:custom", ({shown: now, audio, upload, download, fault: why}) => {
    if (audio) { take(audio) }
    if (now) { show(now) }
    if (upload) { uploaded(upload) }
    if (download) { save(download) }
    if (why) { write(fault, why) }
  })
  model.on("cursor", follow)
  const moved = cursor?.properties.data.change
  if (moved) { cursor.connect(moved, follow) }
  model.on("remove", () => {
    if (moved) { cursor.disconnect(moved, follow) }
    sound.close()
  })
  signal.addEventListener("change", show_signal)

  const matched = make("p", {className: "quiet"})
  follow()
  write(go, "render")
  show_signal()
  choose(chosen)
  send({ready: true})
  return make("section", {className: "body", ariaLabel: "Listen"}, make("h2", {textContent: "Listen"}),
    make("div", {className: "line"}, make("label", {htmlFor: "signal", textContent: "signal"}), signal),
    ...entries.map(({row}) => row), own, fault,
    make("div", {className: "line"}, go, working), said, stale, versions,
    make("div", {className: "line actions"}, play,
      make("span", {}, loop, make("label", {htmlFor: "loop", textContent: "loop"})), keep),
    make("p", {className: "caution", textContent: "Loud sound harms hearing: start with the volume low. Beside the real "
      + "loudspeaker, wear hearing protection as the local rules ask."}),
    matched,
    make("p", {className: "quiet", textContent: "The clip's largest value drives the film with the design's amplitude. Level: r.m.s. "
      + "at the listener over the loudest 0.4 s, re 20 µPa. Sound above 7.5 kHz is left out; small loudspeakers leave out low tones."}))
}
