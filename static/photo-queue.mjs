// Sends photos after their records: one at a time, each named by its SHA-256; one lets go only on an answer that names it.
// Storage and sending are passed in. Pure.

/** Answers after which the same bytes will never be taken. */
const REFUSED = new Set([400, 409, 413, 422]);

/**
 * storage: {waitingPhotos() → rows {sha256, entry, blob}, settlePhoto(sha256, {store, epoch}), refusePhoto(sha256, text)}; send(row) →
 * {ok, status, body:{sha256, store, epoch}}. Gives {state: "empty" | "unreached" | "signed-out" | "busy" | "trouble", sent}.
 */
export async function drainPhotos({ storage, send }) {
  const done = { state: "empty", sent: 0 };
  for (const row of await storage.waitingPhotos()) {
    const answer = await send(row);
    if (answer.ok && answer.body?.sha256 === row.sha256) {
      await storage.settlePhoto(row.sha256, { store: answer.body.store, epoch: answer.body.epoch });
      done.sent++;
    } else if (REFUSED.has(answer.status)) await storage.refusePhoto(row.sha256, answer.body?.error?.text ?? "");
    else if (answer.status === 404) continue; // its entry is not there yet, or was refused; the others may go
    else return { ...done, state: answer.status === 0 ? "unreached" : answer.status === 401 ? "signed-out" : answer.status === 429 ? "busy" : "trouble" };
  }
  return done;
}
