// One round of exchange: say who we are, send what waits, then take fresh copies of the sites. Storage and network are
// passed in. Losing the right to a site drops its copy, never what waits. Pure.

import { drainPhotos } from "./photo-queue.mjs";
import { drain } from "./tray.mjs";

const FRESH = 10 * 60_000; // a copy older than this is taken again
const SOON = 2 * 60_000; // and after this already where something of ours went to its site; until then it is laid over the copy
const KEEP_PHOTOS = 14 * 86_400_000; // sent photos stay this long
const KEEP_SENT = 180 * 86_400_000; // acknowledged records stay this long, so that a restored server can be refilled

/**
 * syncing({state, tray, along, net, now, newId, changed}) → {run, takeOver}; run() gives {state, retryAfter} for
 * sending.mjs.
 * state is the app's: me, sites, records, line, said (the server's own sentence about trouble), offset, busy.
 */
export function syncing({ state, tray, along, net, now, newId, changed }) {
  async function remember(name, value) {
    state.me[name] = value;
    await tray.setMe(name, value);
  }

  function note(answer) {
    if (answer.offset !== null && answer.offset !== undefined) {
      state.offset = answer.offset;
      if (Math.abs(answer.offset - (state.me.offset ?? 0)) > 2000) remember("offset", answer.offset).catch(() => {});
    }
    return answer;
  }

  async function enrol() {
    if (!state.me.installation) await remember("installation", newId());
    const answer = note(await net.enrol(state.me.installation));
    if (!answer.ok) return answer;
    await remember("person", answer.body.person.id);
    await remember("name", answer.body.person.name);
    await remember("logs", answer.body.logs);
    await remember("token", answer.body.token);
    return answer;
  }

  /** Calls with our token; one that is no longer good is replaced once, by the session of this browser. */
  async function withToken(call) {
    if (!state.me.token) {
      const enrolled = await enrol();
      if (!enrolled.ok) return enrolled;
    }
    const answer = note(await call(state.me.token));
    if (answer.status !== 401) return answer;
    const enrolled = await enrol();
    return enrolled.ok ? note(await call(state.me.token)) : enrolled;
  }

  const storage = {
    waiting: () => tray.waiting(),
    settle: (id, receipt) => tray.settle(id, receipt, now()),
    refuse: (id, receipt) => tray.refuse(id, receipt),
  };

  async function refreshSites() {
    const listed = await withToken((token) => net.logs(token));
    if (!listed.ok) return listed;
    await remember("logs", listed.body.logs);
    const mine = new Set(listed.body.logs.map((l) => l.log));
    for (const log of state.sites.keys()) if (!mine.has(log)) await dropSite(log);
    let worst = listed;
    for (const { log, code } of listed.body.logs) {
      if (!code || !wanted(log)) continue;
      const answer = await refreshSite(log);
      if (answer.ok || answer.status === 403 || answer.status === 404) continue;
      worst = answer;
      if (answer.status === 0 || answer.status === 401) break; // the others would fare the same; any other fault is this site's own
    }
    return worst;
  }

  function wanted(log) {
    const row = state.sites.get(log);
    if (!row) return true;
    const age = Math.abs(now() - row.taken); // a clock set back makes no copy fresh for ever
    return age > FRESH || (age > SOON && state.records.some((r) => r.log === log && r.state === "sent"));
  }

  async function refreshSite(log) {
    const held = state.records.filter((r) => r.log === log && r.state === "sent").map((r) => r.id);
    const answer = await withToken((token) => net.snapshot(token, log));
    if (answer.status === 403 || answer.status === 404) await dropSite(log);
    if (!answer.ok) return answer;
    const row = { log, taken: now(), snapshot: answer.body };
    await along.put(row);
    state.sites.set(log, row);
    if (held.length > 0) await tray.cover(held);
    state.records = await tray.records();
    changed();
    return answer;
  }

  async function dropSite(log) {
    await along.drop(log);
    state.sites.delete(log);
    changed();
  }

  /** Takes whoever is signed in to this browser as the one who makes entries from now on. */
  async function takeOver() {
    const answer = await enrol();
    state.line = answer.ok ? state.line : answer.status === 401 ? "signed-out" : answer.status === 0 ? "unreached" : "trouble";
    changed();
    return answer.ok;
  }

  async function run() {
    state.busy = true;
    const sent = await drain({ storage, send: (body) => withToken((token) => net.push(token, body)), sentAt: () => new Date(now()).toISOString() });
    state.records = await tray.records();
    let line = sent.state;
    if (line === "empty") { // photos follow the records that name them
      const shots = await drainPhotos({ storage: { waitingPhotos: tray.waitingPhotos, settlePhoto: (sha) => tray.settlePhoto(sha, now()), refusePhoto: tray.refusePhoto }, send: (row) => withToken((token) => net.photo(token, row)) });
      state.photos = (await tray.waitingPhotos()).length;
      if (shots.state !== "empty") line = shots.state;
      else await tray.forgetPhotos(now() - KEEP_PHOTOS);
    }
    if (line === "empty" || line === "trouble") { // what cannot be sent just now does not keep fresh copies away
      await tray.forget(now() - KEEP_SENT);
      const fresh = await refreshSites();
      state.said = fresh.ok ? null : fresh.body?.error?.text ?? null;
      if (!fresh.ok) line = fresh.status === 0 ? "unreached" : fresh.status === 401 ? "signed-out" : "trouble";
    }
    state.line = line;
    state.busy = false;
    changed();
    return { state: line, retryAfter: sent.retryAfter };
  }

  return { run, takeOver };
}
