// Takes a label's tag: typed, or read by the camera, with its lamp where the phone lets us. Uses the tag only, never the
// address a code holds.

import { html, useEffect, useRef, useState } from "./vendor/htm-preact.mjs";
import { codeReader } from "./scan-reader.mjs";
import { pageRead, tagTyped } from "./tag-typed.mjs";

/** props: app, onTag(tag), onPage(its page's address) where the code of a round's sheet will do as well, label (of the field). */
export function TagTaker({ app, onTag, onPage, label }) {
  const { say } = app;
  const [typed, setTyped] = useState("");
  const [looking, setLooking] = useState(false);
  const { error } = tagTyped(typed);
  const type = (text) => {
    setTyped(text);
    const { tag } = tagTyped(text);
    if (tag) { setTyped(""); setLooking(false); onTag(tag); }
  };
  return html`<div class="taker">
    ${looking && html`<${Camera} app=${app} read=${onPage ? pageRead : labelIn} onTag=${(value) => { setLooking(false); (onPage ?? onTag)(value); }} onClose=${() => setLooking(false)} />`}
    <div class="beside"><label class="find"><span class="unseen">${label ?? say("scan.type")}</span>
      <input value=${typed} placeholder=${label ?? say("scan.type")} autocapitalize="characters" autocomplete="off" spellcheck="false" aria-invalid=${error ? "true" : null} onInput=${(e) => type(e.currentTarget.value)} /></label>
      ${!looking && html`<button type="button" class="big" onClick=${() => setLooking(true)}>${say("scan.scan")}</button>`}</div>
    ${error && html`<p class="bad" role="alert">${say(error)}</p>`}
  </div>`;
}

const labelIn = (text) => {
  const { tag, error } = tagTyped(text, { whole: true });
  return { value: tag, error };
};

/** The camera's picture until a code of ours is seen; what goes wrong is said in its place. read(text) → {value} or {error}. */
export function Camera({ app, onTag, onClose, read = labelIn, hold = "scan.hold" }) {
  const { say } = app;
  const video = useRef(null), live = useRef(null);
  const [trouble, setTrouble] = useState(null);
  const [lamp, setLamp] = useState(null); // null: the camera has none we may switch
  useEffect(() => {
    let over = false;
    const stop = () => { over = true; live.current?.getTracks().forEach((t) => t.stop()); };
    look(video.current, live, { over: () => over, onLamp: () => setLamp(false), onText: (text) => {
      const { value, error } = read(text);
      if (value) { stop(); onTag(value); } else setTrouble(error);
      return Boolean(value);
    } }).catch((e) => { if (!over) setTrouble(troubleOf(e)); });
    return stop;
  }, []);
  const switchLamp = () => live.current?.getVideoTracks()[0].applyConstraints({ advanced: [{ torch: !lamp }] }).then(() => setLamp(!lamp), () => setLamp(null));
  return html`<div class="camera">
    <video ref=${video} muted playsinline aria-label=${say("scan.picture")}></video>
    <p role="status" class=${trouble ? "bad" : "hint"}>${say(trouble ?? hold)}</p>
    <div class="pair">${lamp !== null && html`<button type="button" aria-pressed=${String(lamp)} onClick=${switchLamp}>${say("scan.lamp")}</button>`}
      <button type="button" onClick=${onClose}>${say("scan.close")}</button></div>
  </div>`;
}

async function look(video, live, { over, onLamp, onText }) {
  if (!navigator.mediaDevices?.getUserMedia) throw new DOMException("", "NotFoundError");
  const stream = await navigator.mediaDevices.getUserMedia({ audio: false, video: { facingMode: "environment", width: { ideal: 1280 } } });
  live.current = stream;
  if (over()) return stream.getTracks().forEach((t) => t.stop());
  video.srcObject = stream;
  if (stream.getVideoTracks()[0].getCapabilities?.().torch) onLamp();
  const [read] = await Promise.all([codeReader(), video.play()]);
  while (!over()) {
    const text = await read(video);
    if (over() || (text && onText(text))) return;
    await new Promise((go) => setTimeout(go, 120)); // eight looks a second leave the phone cool
  }
}

function troubleOf(e) {
  if (e?.name === "NotAllowedError") return "scan.not_allowed";
  if (e?.name === "NotFoundError" || e?.name === "NotReadableError" || e?.name === "OverconstrainedError") return "scan.no_camera";
  return "scan.cannot_read";
}
