// Keeps the head (size and root) of every log this phone looks after, and holds the server to it: at each exchange the log must
// go on from what was known of it. Where it does not, the person is told and the server's manager too; work goes on, and what is
// on the phone stays. Network and storage are passed in. Pure but for the browser's SHA-256.

import { continues, includes, leafData, leafHash } from "./proof.mjs";

/**
 * heads({state, tray, net, withToken, now, keep}) → {compare(listed), goOn(log)}. listed: the answer to what logs there are;
 * compare gives how many records must be sent once more. state.me.heads is
 * log → {server, size, root, seen, own, since, doubt}; own is the id of the newest record of ours there; since: somebody took the book as
 * it was then for known; doubt is {at, size, told}: since when, how long the log is instead, whether the server took what we know.
 */
export function heads({ state, tray, net, withToken, now, keep }) {
  /** Which of the logs to look after: those of copies on the phone, and the organisation's. */
  const looksAfter = (log) => log === "org" || state.sites.has(log);

  async function compare({ logs, store, epoch }) {
    const known = { ...state.me.heads }, server = `${store} ${epoch}`;
    let again = 0;
    for (const log of Object.keys(known)) if (!logs.some((l) => l.log === log)) delete known[log]; // not ours any more
    for (const listed of logs) {
      if (!listed.root || !looksAfter(listed.log)) continue;
      const before = known[listed.log];
      if (before && before.server === server && before.size === listed.size && before.root === listed.root && !before.doubt) continue;
      const head = await compared(listed, before, server);
      if (head) known[listed.log] = head;
      if (head?.doubt && !before?.doubt) again += await tray.resend((r) => r.log === listed.log); // what the server still has it answers "already"
    }
    await keep("heads", known);
    return again;
  }

  /** The head to keep of one log. A server of another epoch was restored, or is another server: its book begins anew here, and that is no fault. */
  async function compared(listed, before, server) {
    const same = before?.server === server, own = await ownRecord(listed.log, before, server);
    const answer = await withToken((token) => net.head(token, listed.log, same ? before.size : 0, own?.receipt.pos ?? 0));
    if (!answer.ok || `${answer.body.store} ${answer.body.epoch}` !== server) return before; // asked again next time
    const { size, root, proof } = answer.body, head = { server, size, root, seen: now(), own: own?.id, since: before?.since };
    const goesOn = (!same || (await continues(proof, size, root, before.size, before.root))) && (!own || (await standsThere(own, answer.body)));
    if (goesOn) {
      if (same && before.doubt) await tell(listed.log, before);
      return head;
    }
    const kept = same ? before : head;
    return { ...kept, doubt: { at: before?.doubt?.at ?? now(), size, told: before?.doubt?.told || (await tell(listed.log, kept)) } };
  }

  /** Tells the server which head this phone knows; it looks for itself, keeps what does not hold for the manager, and drops it once it does. */
  async function tell(log, { size, root }) {
    const answer = await withToken((token) => net.tellHead(token, { log, size, root }));
    return answer.ok;
  }

  /** The newest record this server acknowledged in a log, whose place it must still have. */
  async function ownRecord(log, before, server) {
    const known = before?.own && (await tray.record(before.own)), rows = state.records.filter((r) => r.log === log);
    return [known, ...rows].filter((r) => r?.receipt?.pos > 0 && `${r.receipt.store} ${r.receipt.epoch}` === server && r.state !== "waiting" && r.sent_at >= (before?.since ?? 0))
      .reduce((last, r) => (last && last.receipt.pos > r.receipt.pos ? last : r), null);
  }

  async function standsThere(row, { size, root, own }) {
    if (row.receipt.pos > size || !own) return false;
    return includes(own.proof, size, root, own.pos - 1, await leafHash(leafData(own.stamp, row.record)));
  }

  /** Takes the book as it is now for known, once somebody has looked into it. */
  async function goOn(log) {
    await keep("heads", { ...state.me.heads, [log]: { since: now() } });
  }

  return { compare, goOn };
}

/** Logs whose book does not go on from what this phone knew, with since when: [{log, at, size, told}]. */
export const doubted = (me) => Object.entries(me.heads ?? {}).filter(([, h]) => h?.doubt).map(([log, h]) => ({ log, known: h.size, ...h.doubt }));
