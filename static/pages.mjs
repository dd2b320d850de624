// The pages of the field client by their addresses.

import { html } from "./vendor/htm-preact.mjs";
import { AlongPage } from "./field-along.mjs";
import { CorrectPage } from "./field-correct.mjs";
import { DarkPage } from "./field-dark.mjs";
import { DevicePage } from "./field-device.mjs";
import { DevicesPage } from "./field-devices.mjs";
import { FailedPage } from "./field-failed.mjs";
import { FlawPage } from "./field-flaw.mjs";
import { BringPage } from "./field-item.mjs";
import { FindPage, UnknownTagPage } from "./field-find.mjs";
import { HandPage, TakePage } from "./field-hand.mjs";
import { LostPage } from "./field-parts.mjs";
import { PeoplePage } from "./field-people.mjs";
import { AddPage, BindPage, LabelPage, MovePage } from "./field-register.mjs";
import { ReplacePage } from "./field-replace.mjs";
import { RoomPage, RoundPage } from "./field-round.mjs";
import { SitesPage } from "./field-sites.mjs";
import { TestPage } from "./field-test.mjs";
import { TrayPage } from "./field-tray.mjs";

const ALONE = { find: FindPage, along: AlongPage, tray: TrayPage, people: PeoplePage };
const OF_SITE = { add: AddPage, bind: BindPage, round: RoundPage, hand: HandPage, take: TakePage };
const OF_DEVICE = { label: LabelPage, move: MovePage, replace: ReplacePage, dark: DarkPage, failed: FailedPage, room: RoomPage, bring: BringPage, flaw: FlawPage };

/** The page of a route; the app is read anew at every drawing. */
export function Page({ app }) {
  const { page, a, b, tag, code, device, task } = app.state.route;
  if (ALONE[page]) return html`<${ALONE[page]} app=${app} />`;
  if (page === "tag") return html`<${UnknownTagPage} app=${app} tag=${tag} />`;
  if (page === "correct") return html`<${CorrectPage} app=${app} entry=${a} key=${a} />`;
  if (page === "site") return ofSite(app, code, (site) => html`<${DevicesPage} app=${app} site=${site} key=${site.log} />`);
  if (OF_SITE[page]) return ofSite(app, a, (site) => html`<${OF_SITE[page]} app=${app} site=${site} tag=${b} key=${`${page}${a}`} />`);
  if (page === "device") return ofDevice(app, device, (found) => html`<${DevicePage} app=${app} ...${found} />`);
  if (OF_DEVICE[page]) return ofDevice(app, page === "room" ? b : a, (found) => html`<${OF_DEVICE[page]} app=${app} ...${found} given=${b} key=${`${page}${a}`} />`);
  if (page === "test") {
    const test = app.openTest(device, task);
    return test ? html`<${TestPage} app=${app} test=${test} key=${test.draft.key} />` : lost(app, "field.device_not_here");
  }
  return html`<${SitesPage} app=${app} />`;
}

const lost = (app, words) => html`<${LostPage} app=${app} text=${app.say(words)} />`;

function ofSite(app, code, draw) {
  const site = app.siteByCode(code);
  return site ? draw(site) : lost(app, "field.site_not_here");
}

function ofDevice(app, id, draw) {
  const found = app.findDevice(id);
  return found ? draw(found) : lost(app, "field.device_not_here");
}
