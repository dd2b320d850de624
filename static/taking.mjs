// Takes sites along: a copy of each chosen site, and by its cursor the question whether anything came since. What only we
// ourselves wrote is laid over the copy; when anybody else wrote, the copy is taken again whole, in the background. To
// work others' records into a copy would mean to compute dates, limits and corrections on the phone as the server does;
// a packed copy of 5,000 devices is smaller than that program. Storage and network are passed in. Pure.

import { clockText, mergeClock, parseClock } from "./clock.mjs";
import { dayIn } from "./days.mjs";

/** With so many sites or fewer, all of them are taken along until somebody chooses. */
const TAKEN_UNASKED = 6;
const OWN_LAID_OVER = 30 * 60_000; // after this, own records are taken with a fresh copy too, so that the layer stays thin
const PAGE = 200;
/** What of the organisation's log changes a copy. */
const RULES = new Set(["forms.set", "limits.set", "plan.set", "instrument.set", "instrument.calibrated"]);

/** Whether a site is to be on this phone. */
export function isChosen(me, log) {
  const sites = (me.logs ?? []).filter((l) => l.code);
  return me.chosen ? me.chosen.includes(log) : sites.length <= TAKEN_UNASKED;
}

/**
 * taking({state, tray, along, net, now, remember, withToken, changed}) → {refresh, choose}. refresh() gives
 * {answer, resent, listed}: the worst answer there was, how many records must be sent once more, and what logs the server told of.
 */
export function taking({ state, tray, along, net, now, remember, withToken, changed }) {
  async function refresh() {
    const listed = await withToken((token) => net.logs(token));
    if (!listed.ok) return { answer: listed, resent: 0 };
    await remember("logs", listed.body.logs);
    if (listed.body.sealed?.length > 0 && (await tray.forgetSealed(listed.body.sealed)) > 0) state.records = await tray.records();
    const resent = await sendLostAgain(listed.body);
    const mine = new Set(listed.body.logs.map((l) => l.log));
    for (const log of state.sites.keys()) if (!mine.has(log)) await dropSite(log);
    const org = listed.body.logs.find((l) => l.log === "org");
    let worst = listed, again = resent;
    for (const site of listed.body.logs) {
      if (!site.code || !isChosen(state.me, site.log)) continue;
      const { answer, resent: more = 0 } = await refreshSite(site, org);
      again += more;
      if (answer.ok || answer.status === 403 || answer.status === 404) continue;
      worst = answer;
      if (answer.status === 0 || answer.status === 401) break; // the others would fare the same; any other fault is this site's own
    }
    await askHeld();
    return { answer: worst, resent: again, listed: listed.body };
  }

  /** A server of another epoch, or one whose log is shorter than what it once acknowledged, was restored: what is kept goes again. */
  async function sendLostAgain({ logs, store, epoch }) {
    const sizes = new Map(logs.map((l) => [l.log, l.size]));
    const lost = ({ receipt, log }) => (receipt?.epoch !== undefined && (receipt.epoch !== epoch || receipt.store !== store)) || (receipt?.pos ?? 0) > (sizes.get(log) ?? Infinity);
    if (epoch === undefined) return 0;
    const server = `${store} ${epoch}`;
    if (state.me.server && state.me.server !== server) {
      await remember("backed_up", {}); // what backups of before covered is said anew
      await remember("restored", { at: now(), another: !state.me.server.startsWith(`${store} `) });
    }
    if (state.me.server !== server) await remember("server", server);
    return (await tray.resend(lost)) + (await tray.resendPhotos({ store, epoch }));
  }

  async function refreshSite({ log, size }, org) {
    const row = state.sites.get(log);
    if (!row?.cursor) return { answer: await takeSite(log, size, org?.size) };
    const seen = { log, taken: now(), size, org_size: org?.size };
    let cursor = row.cursor, orgCursor = row.org_cursor, stale = row.snapshot.today !== dayIn(now() + (state.offset ?? 0), row.snapshot.site.zone);
    if (size !== row.size || stale) {
      const pulled = await pull(log, cursor);
      if (!pulled.answer.ok) return pulled;
      if (pulled.body.not_yours) { await dropSite(log); return pulled; }
      if (pulled.body.snapshot) return { answer: await takeSite(log, size, org?.size), resent: await tray.resend((r) => r.log === log) };
      stale ||= pulled.body.more || !(await ownOnly(pulled.records)) || now() - row.whole > OWN_LAID_OVER && pulled.records.length > 0;
      cursor = pulled.body.next;
    }
    if (!stale && org && org.size !== row.org_size) {
      const pulled = await pull("org", orgCursor);
      if (!pulled.answer.ok) return pulled;
      stale = pulled.body.snapshot || pulled.body.more || pulled.records.some((r) => RULES.has(r.kind));
      orgCursor = pulled.body.next;
    }
    if (stale) return { answer: await takeSite(log, size, org?.size) };
    Object.assign(row, seen, { cursor, org_cursor: orgCursor });
    await along.mark(row);
    return { answer: { ok: true, status: 200 } };
  }

  async function pull(log, after) {
    const answer = await withToken((token) => net.pull(token, log, after, PAGE));
    const body = answer.body ?? {};
    const records = [];
    for (const { record } of body.records ?? []) {
      try { records.push(JSON.parse(record)); } catch { records.push({}); } // refused bytes are never in a log; a stranger's record is a stranger's
    }
    if (answer.ok && records.length > 0) await tray.sawClock(clockText(records.reduce((max, r) => mergeClock(max, parseClock(r.clock) ?? 0n), 1n)));
    if (answer.ok && body.backed_up) await remember("backed_up", { ...state.me.backed_up, [log]: body.backed_up });
    return { answer, body, records };
  }

  async function ownOnly(records) {
    const own = new Set(state.records.map((r) => r.id));
    return records.every((r) => own.has(r.id));
  }

  async function takeSite(log, size, orgSize) {
    const held = state.records.filter((r) => r.log === log && r.state === "sent" && r.receipt?.state !== "held").map((r) => r.id);
    const answer = await withToken((token) => net.snapshot(token, log));
    if (answer.status === 403 || answer.status === 404) await dropSite(log);
    if (!answer.ok) return answer;
    const { cursor, org_cursor: orgCursor, clock } = answer.body;
    const row = { log, taken: now(), whole: now(), size, org_size: orgSize, cursor, org_cursor: orgCursor, snapshot: answer.body };
    await along.put(row);
    state.sites.set(log, row);
    if (clock) await tray.sawClock(clock);
    if (held.length > 0) await tray.cover(held);
    state.records = await tray.records();
    changed();
    return answer;
  }

  /** Records a branch holds for the server, and refused ones a manager may have let in: whether the server has them by now. */
  async function askHeld() {
    const ids = state.records.filter((r) => (r.receipt?.state === "held" && r.state === "sent") || (r.state === "refused" && r.receipt?.code !== "id_reused")).map((r) => r.id).slice(0, 1000);
    if (ids.length === 0) return;
    const answer = await withToken((token) => net.ask(token, ids));
    const there = (answer.ok ? answer.body.receipts ?? [] : []).filter((receipt) => receipt.state === "stored" && ids.includes(receipt.id));
    if (there.length > 0) await tray.settle(there, now());
  }

  async function dropSite(log) {
    await along.drop(log);
    state.sites.delete(log);
    changed();
  }

  /** Takes a site along from now on, or drops its copy; what waits to be sent is not touched. */
  async function choose(log, yes) {
    const sites = (state.me.logs ?? []).filter((l) => l.code).map((l) => l.log);
    await remember("chosen", sites.filter((s) => (s === log ? yes : isChosen(state.me, s))));
    if (!yes) await dropSite(log);
    changed();
  }

  return { refresh, choose };
}
