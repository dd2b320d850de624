// The pages of work beside a test, by their addresses.

import { html } from "./vendor/htm-preact.mjs";
import { CorrectPage } from "./field-correct.mjs";
import { DarkPage } from "./field-dark.mjs";
import { FindPage, UnknownTagPage } from "./field-find.mjs";
import { LostPage } from "./field-lists.mjs";
import { AddPage, BindPage, LabelPage, MovePage } from "./field-register.mjs";
import { ReplacePage } from "./field-replace.mjs";
import { RoomPage, RoundPage } from "./field-round.mjs";

const OF_SITE = { add: AddPage, bind: BindPage, round: RoundPage };
const OF_DEVICE = { label: LabelPage, move: MovePage, replace: ReplacePage, dark: DarkPage };

/** The page of the app's route, null where it is none of these. */
export function WorkPage({ app }) {
  const { say } = app, { page, a, b, tag } = app.state.route;
  if (page === "find") return html`<${FindPage} app=${app} />`;
  if (page === "tag") return html`<${UnknownTagPage} app=${app} tag=${tag} />`;
  if (page === "correct") return html`<${CorrectPage} app=${app} entry=${a} key=${a} />`;
  if (OF_SITE[page]) {
    const site = app.siteByCode(a);
    return site ? html`<${OF_SITE[page]} app=${app} site=${site} tag=${b} key=${`${page}${a}`} />` : html`<${LostPage} app=${app} text=${say("field.site_not_here")} />`;
  }
  if (OF_DEVICE[page] || page === "room") {
    const found = app.findDevice(page === "room" ? b : a);
    if (!found) return html`<${LostPage} app=${app} text=${say("field.device_not_here")} />`;
    return html`<${OF_DEVICE[page] ?? RoomPage} app=${app} ...${found} given=${b} key=${`${page}${a}`} />`;
  }
  return null;
}
