// Draws the scale under a number from the figures of scale.mjs.

import { html } from "./vendor/htm-preact.mjs";
import { drawing, WIDTH } from "./scale.mjs";

const Y = 24; // the line the values lie on

/** colour: pass | watch | fail | none, of today's mark. label: the whole drawing in words. */
export function Scale({ scale, bounds, value, beyond, last, colour, label }) {
  const d = drawing(scale, { bounds, value, beyond, last });
  return html`<svg class="scale" viewBox=${`0 0 ${WIDTH} 46`} role="img" aria-label=${label}>
    <line x1="0" y1=${Y} x2=${WIDTH} y2=${Y} class="rail" />
    ${d.band && html`<rect x=${d.band.x} y=${Y - 6} width=${d.band.width} height="12" class="band" />`}
    ${d.band?.left && html`<line x1=${d.band.x} y1=${Y - 12} x2=${d.band.x} y2=${Y + 9} class="limit" />`}
    ${d.band?.right && html`<line x1=${d.band.x + d.band.width} y1=${Y - 12} x2=${d.band.x + d.band.width} y2=${Y + 9} class="limit" />`}
    ${d.ticks.map((t, i) => html`<text key=${t.text} x=${t.x} y="45" text-anchor=${i === 0 && t.x < 12 ? "start" : t.x > WIDTH - 12 ? "end" : "middle"}>${t.text}</text>`)}
    ${d.lastMark && html`<line x1=${d.lastMark.x} y1=${Y - 8} x2=${d.lastMark.x} y2=${Y + 8} class="last" />`}
    ${d.mark && html`<g class=${`mark ${colour}`}>
      ${d.mark.beyond
        ? html`<path d=${beyondArrow(d.mark)} />`
        : html`<path d=${`M${d.mark.x - 7} 2 h14 l-7 10 z`} /><line x1=${d.mark.x} y1="11" x2=${d.mark.x} y2=${Y + 10} />`}
    </g>`}
  </svg>`;
}

/** A mark that says "further that way". */
function beyondArrow({ x, beyond }) {
  const way = beyond === "above" ? 1 : -1;
  return `M${x - way * 6} ${Y - 10} l${way * 10} 10 l${-way * 10} 10 z`;
}
