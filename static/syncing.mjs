// One round of exchange: say who we are, send what waits, then look after the copies of the sites. Storage and network
// are passed in. Losing the right to a site drops its copy, never what waits. Pure.

import { drainPhotos } from "./photo-queue.mjs";
import { heads } from "./heads.mjs";
import { taking } from "./taking.mjs";
import { drain } from "./tray.mjs";

const KEEP_PHOTOS = 14 * 86_400_000; // sent photos stay this long
const TIDY = 60 * 60_000;

/**
 * syncing({state, tray, along, net, now, newId, changed}) → {run, takeOver, choose, entry, goOn}; run() gives {state, retryAfter} for
 * sending.mjs.
 * state is the app's: me, sites, records, line, said (the server's own sentence about trouble), offset, busy.
 */
export function syncing({ state, tray, along, net, now, newId, changed }) {
  /** Writes only what is new: every write waits for the disk, and so does whoever saves meanwhile. */
  async function remember(name, value) {
    const same = JSON.stringify(state.me[name]) === JSON.stringify(value);
    state.me[name] = value;
    if (!same) await tray.setMe(name, value);
  }

  /** Looks for what may be dropped, now and then. */
  let tidied = -Infinity;
  async function tidy() {
    if (now() - tidied < TIDY) return;
    tidied = now();
    await tray.forget(now(), state.me.backed_up ?? {});
    if ((state.photos ?? 0) === 0) await tray.forgetPhotos(now() - KEEP_PHOTOS);
  }

  function note(answer) {
    if (answer.offset !== null && answer.offset !== undefined) {
      state.offset = answer.offset;
      if (Math.abs(answer.offset - (state.me.offset ?? 0)) > 2000) remember("offset", answer.offset).catch(() => {});
    }
    return answer;
  }

  /** Known to the server as this phone. wanted: somebody signed in to make entries here; else a token is only renewed, and who works stays. */
  async function enrol({ wanted = false } = {}) {
    if (!state.me.installation) await remember("installation", newId());
    const answer = note(await net.enrol(state.me.installation));
    if (!answer.ok) return answer;
    const { id, name } = answer.body.person;
    await remember("people", { ...state.me.people, [id]: { ...state.me.people?.[id], name } });
    if (wanted || !state.me.people[state.me.person]) {
      await tray.become(id, name);
      Object.assign(state.me, { person: id, name });
    }
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

  /** What was made under an id this phone no longer uses goes with the token of that id. */
  const send = (body, from) => {
    const former = from && from !== state.me.installation ? state.me.former?.[from] : undefined;
    return former ? net.push(former, body).then(note) : withToken((token) => net.push(token, body));
  };

  const storage = {
    waiting: () => tray.waiting(),
    settle: (receipts) => tray.settle(receipts, now()),
    refuse: (id, receipt) => tray.refuse(id, receipt),
  };

  const { refresh, choose } = taking({ state, tray, along, net, now, remember, withToken, changed });
  const book = heads({ state, tray, net, withToken, now, keep: async (name, value) => {
    const same = JSON.stringify(state.me[name]) === JSON.stringify(value);
    state.me[name] = value;
    if (!same) await tray.noteMe(name, value);
  } });

  /** Another phone counts with our id: this one was copied or restored. It takes a new id; what it made so far keeps the old one. */
  async function renew() {
    const installation = newId(), before = state.me.installation;
    const answer = note(await net.renew(state.me.token, installation));
    if (!answer.ok) return;
    const former = { ...state.me.former, [before]: state.me.token };
    await tray.renew({ installation, token: answer.body.token, former });
    Object.assign(state.me, { installation, token: answer.body.token, former });
  }

  /** Takes whoever is signed in to this browser as the one who makes entries from now on. */
  async function takeOver() {
    const answer = await enrol({ wanted: true });
    state.line = answer.ok ? state.line : answer.status === 401 ? "signed-out" : answer.status === 0 ? "unreached" : "trouble";
    changed();
    return answer.ok;
  }

  async function empty() {
    const sent = await drain({ storage, send, sentAt: () => new Date(now()).toISOString() });
    if (sent.reused) await renew();
    state.records = await tray.records();
    return sent;
  }

  /** Sends what waits, then the photos that follow the records that name them. */
  async function flush() {
    const sent = await empty();
    if (sent.state !== "empty") return { ...sent, line: sent.state };
    const shots = await drainPhotos({ storage: { waitingPhotos: tray.waitingPhotos, settlePhoto: (sha, server) => tray.settlePhoto(sha, now(), server), refusePhoto: tray.refusePhoto }, send: (row) => withToken((token) => net.photo(token, row)) });
    state.photos = (await tray.waitingPhotos()).length;
    state.refusedPhotos = await tray.refusedPhotos();
    return { ...sent, line: shots.state };
  }

  async function run() {
    state.busy = true;
    let sent = await flush(), line = sent.line;
    if (line === "empty" || line === "trouble") { // what cannot be sent just now does not keep fresh copies away
      await tidy();
      const { answer, resent, listed } = await refresh();
      const more = listed ? await book.compare(listed).catch((e) => { console.error(e); return 0; }) : 0; // a witness is never in the way of work
      state.said = answer.ok ? null : answer.body?.error?.text ?? null;
      if (resent + more > 0 && answer.ok) {
        sent = await flush();
        line = sent.line;
      }
      if (!answer.ok) line = answer.status === 0 ? "unreached" : answer.status === 401 ? "signed-out" : "trouble";
    }
    state.line = line;
    state.busy = false;
    changed();
    return { state: line, retryAfter: sent.retryAfter };
  }

  /** An entry this phone did not make; null where it cannot be had just now. */
  async function entry(id) {
    const answer = await withToken((token) => net.entry(token, id));
    return answer.ok ? answer.body : null;
  }

  async function goOn(log) {
    await book.goOn(log);
    changed();
  }

  return { run, takeOver, choose, entry, goOn };
}
