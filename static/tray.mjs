// Empties the tray: sends what waits, and lets a record go only on a receipt that carries its own id. Storage and the
// sending are passed in, so that node can try lost answers, refusals and answers of every kind.
//
// storage: {waiting() → rows oldest first, settle(receipts), refuse(id, receipt)}; receipts each with
// the id of its row; a row is {id, record, …}.
// send(body) → what exchange.push gives: {ok, status, body, retryAfter}.

/** Limits of one push: 500 records or 512 KiB; a little is left for the envelope. */
const MOST_RECORDS = 500;
const MOST_BYTES = 500 * 1024;
const KEPT_STATES = new Set(["stored", "already", "held"]);

const utf8 = new TextEncoder();

/** The installation a record names: of the envelope, which no text in the body can look like (quotes are escaped there). */
export const fromOf = (row) => row.from ?? /"from":"([0-9a-f-]{36})"/.exec(row.record)?.[1];

/** The next batch: as many of the oldest rows of one installation as one push may carry, at most `most`. */
export function nextBatch(rows, most = MOST_RECORDS) {
  const batch = [];
  let bytes = 0;
  for (const row of rows) {
    const size = utf8.encode(JSON.stringify(row.record)).length + 16;
    if (batch.length > 0 && (batch.length >= most || bytes + size > MOST_BYTES || fromOf(row) !== fromOf(batch[0]))) break;
    batch.push(row);
    bytes += size;
  }
  return batch;
}

/** The body of a push: each record as the exact string that was kept. */
export function pushBody(batch, sent) {
  return JSON.stringify({ protocol: 1, sent, records: batch.map((row) => ({ record: row.record })) });
}

/**
 * drain({storage, send, sentAt}) → {state, sent, refused, retryAfter}. state: empty (nothing waits), unreached, signed-out,
 * busy, or trouble (the server could not take it now). Only `settle` takes a record out of what waits.
 */
export async function drain({ storage, send, sentAt }) {
  let most = MOST_RECORDS;
  const done = { state: "empty", sent: 0, refused: 0, retryAfter: 0 }, passedOver = new Set();
  for (;;) {
    const rows = (await storage.waiting()).filter((row) => !passedOver.has(fromOf(row)));
    if (rows.length === 0) return passedOver.size > 0 ? { ...done, state: "signed-out" } : done;
    const batch = nextBatch(rows, most), from = fromOf(batch[0]);
    const answer = await send(pushBody(batch, sentAt()), from);
    if (answer.status === 401 && rows.some((row) => fromOf(row) !== from)) { // an id of before whose token ended holds up nobody else
      passedOver.add(from);
      continue;
    }
    if (answer.status === 413) {
      if (batch.length === 1) {
        await storage.refuse(batch[0].id, { id: batch[0].id, state: "refused", code: "too_large", text: "" });
        done.refused++;
        continue;
      }
      most = Math.max(1, Math.floor(batch.length / 2));
      continue;
    }
    if (!answer.ok) return { ...done, state: troubled(answer.status), retryAfter: answer.retryAfter ?? 0 };
    const settled = await settleBatch(storage, batch, answer.body?.receipts, done);
    if (settled === 0) return { ...done, state: "trouble" };
  }
}

/**
 * Applies receipts to the rows of their own batch; a receipt for anything else is ignored. Bytes in which the server finds no
 * id come back refused without one; receipts stand in the order of the batch, so their place tells which row is meant.
 */
async function settleBatch(storage, batch, receipts, done) {
  const list = Array.isArray(receipts) ? receipts : [], open = new Set(batch.map((row) => row.id));
  const byPlace = list.length === batch.length;
  const taken = [];
  let refused = 0;
  for (const [i, receipt] of list.entries()) {
    const id = receipt?.id || (byPlace && receipt?.state === "refused" ? batch[i].id : undefined);
    if (!open.delete(id)) continue;
    if (KEPT_STATES.has(receipt.state)) {
      taken.push({ ...receipt, id });
      if (receipt.reused) done.reused = true;
    } else if (receipt.state === "refused") {
      await storage.refuse(id, receipt);
      refused++;
    }
  }
  if (taken.length > 0) await storage.settle(taken); // one transaction for all: 500 of their own take the phone seconds
  done.sent += taken.length;
  done.refused += refused;
  return taken.length + refused;
}

function troubled(status) {
  if (status === 0) return "unreached";
  if (status === 401) return "signed-out";
  return status === 429 ? "busy" : "trouble";
}

/** Milliseconds until the next try after `tries` failures in a row: doubling from 2 s to 5 min, with jitter, never less than asked. */
export function pause(tries, random, retryAfter = 0) {
  const ceiling = Math.min(300_000, 2_000 * 2 ** Math.min(tries, 10));
  return Math.max(retryAfter * 1000, Math.round(ceiling * (0.5 + random() / 2)));
}
