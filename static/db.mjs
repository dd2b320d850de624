// The phone's two databases. `tray` holds what is ours alone: who we are, the counters, the records and the drafts; no
// reset ever drops it. `along` holds copies of the server's data and may be dropped whole. What is a record's is written
// strictly: the promise resolves when the transaction is complete on disk, and rejects when it is aborted. Drafts are
// written at every keystroke and survive the end of the page, not the loss of power in the same second.

import { openDB, unwrap } from "./vendor/idb.mjs";

const STRICT = { durability: "strict" };
/** For what comes again by itself when power fails in that second: it takes the disk from nobody who saves meanwhile. */
const RELAXED = { durability: "relaxed" };

function openTray() {
  return openDB("tray", 2, {
    upgrade(db, before) {
      if (before < 1) {
        db.createObjectStore("me"); // one value per name
        db.createObjectStore("counter"); // log → n of the last record made here
        const records = db.createObjectStore("records", { keyPath: "id" });
        records.createIndex("state", "state");
        db.createObjectStore("drafts", { keyPath: "key" });
      }
      if (before < 2) db.createObjectStore("photos", { keyPath: "sha256" }).createIndex("state", "state"); // draft → waiting → sent, or refused
    },
  });
}

function openAlong() {
  return openDB("along", 2, {
    upgrade(db) {
      for (const name of [...db.objectStoreNames]) db.deleteObjectStore(name); // copies only: they come again
      db.createObjectStore("sites", { keyPath: "log" });
      db.createObjectStore("marks", { keyPath: "log" });
    },
  });
}

/**
 * A connection that is opened when first needed and opened again once when the browser has dropped it (which happens to
 * pages that were long in the background). use(fn) gives fn an open database; fn must be safe to run twice.
 */
function connection(open) {
  let opening = null;
  const get = () => (opening ??= open().then((db) => {
    unwrap(db).addEventListener("close", () => { opening = null; });
    unwrap(db).addEventListener("versionchange", () => { db.close(); opening = null; });
    return db;
  }).catch((e) => { opening = null; throw e; }));
  return async function use(fn) {
    try {
      return await fn(await get());
    } catch (e) {
      if (e?.name !== "InvalidStateError" && e?.name !== "UnknownError") throw e;
      opening = null;
      return fn(await get());
    }
  };
}

const DAY = 86_400_000;
const KEPT_LEAST = 14 * DAY, KEPT_MOST = 180 * DAY;

/** Whether an acknowledged record may go: two weeks old and in a backup of the server, or half a year old. */
export function isOver({ sent_at: sent, log, receipt }, now, backedUp) {
  const age = now - sent;
  return age > KEPT_MOST || (age > KEPT_LEAST && receipt?.pos > 0 && receipt.pos <= (backedUp[log] ?? 0));
}

const inOrder = (a, b) => {
  const [x, y] = a.clock && b.clock && a.clock !== b.clock ? [a.clock, b.clock] : a.saved !== b.saved ? [a.saved, b.saved] : [a.id, b.id];
  return x < y ? -1 : 1;
};

/** The `tray` database as the client uses it. */
export function trayDB() {
  const use = connection(openTray);
  const write = (store, fn, options = STRICT) => use(async (db) => {
    const tx = db.transaction(store, "readwrite", options);
    const [result] = await Promise.all([fn(tx.store), tx.done]);
    return result;
  });
  const change = (id, fields) => write("records", async (store) => {
    const row = await store.get(id);
    if (row) await store.put({ ...row, ...fields });
  });
  return {
    me: (name) => use((db) => db.get("me", name)),
    setMe: (name, value) => write("me", (store) => store.put(value, name)),
    /** What a failing battery may take back: it is learned again. */
    noteMe: (name, value) => write("me", (store) => store.put(value, name), RELAXED),

    /** Whoever makes the entries from now on: id and name together. */
    become: (person, name) => write("me", async (store) => { await store.put(person, "person"); await store.put(name, "name"); }),

    drafts: () => use((db) => db.getAll("drafts")),
    photo: (sha256) => use((db) => db.get("photos", sha256)),
    putPhoto: (row) => write("photos", async (store) => { if (!(await store.get(row.sha256))) await store.put(row); }),
    dropPhoto: (sha256) => write("photos", async (store) => { if ((await store.get(sha256))?.state === "draft") await store.delete(sha256); }),
    waitingPhotos: () => use((db) => db.getAllFromIndex("photos", "state", "waiting")).then((rows) => rows.sort((a, b) => a.saved - b.saved)),
    settlePhoto: (sha256, at, server) => write("photos", async (store) => {
      const row = await store.get(sha256);
      if (row) await store.put({ ...row, state: "sent", sent_at: at, ...server });
    }),
    /** Photos a server of another store or epoch took wait again; gives how many. */
    resendPhotos: ({ store: own, epoch }) => write("photos", async (store) => {
      const lost = (await store.index("state").getAll("sent")).filter((row) => row.epoch !== undefined && (row.epoch !== epoch || row.store !== own));
      for (const row of lost) await store.put({ ...row, state: "waiting" });
      return lost.length;
    }),
    /** Photos of entries that no server has: for the file that saves the tray. */
    unsentPhotos: () => use(async (db) => (await Promise.all(["waiting", "refused", "handed"].map((s) => db.getAllFromIndex("photos", "state", s)))).flat()),
    refusedPhotos: () => use((db) => db.getAllFromIndex("photos", "state", "refused")),
    /** A refused photo is set aside: given to somebody in a file. It stays on the phone. */
    handOverPhoto: (sha256) => write("photos", async (store) => {
      const row = await store.get(sha256);
      if (row?.state === "refused") await store.put({ ...row, state: "handed" });
    }),
    refusePhoto: (sha256, text) => write("photos", async (store) => {
      const row = await store.get(sha256);
      if (row) await store.put({ ...row, state: "refused", text });
    }),
    /** Drops photos sent before a moment. */
    forgetPhotos: (before) => write("photos", async (store) => {
      for (let c = await store.index("state").openCursor("sent"); c; c = await c.continue()) if (c.value.sent_at < before) await c.delete();
    }),
    recordIds: () => use((db) => db.getAllKeys("records")),
    /** One record of this phone, whatever became of it. */
    record: (id) => use((db) => db.get("records", id)),
    putDraft: (draft) => write("drafts", (store) => store.put(draft), RELAXED),

    /** What pages show: all that is not yet in a copy of the server's data. */
    records: () => use(async (db) => (await Promise.all(["waiting", "refused", "sent"].map((s) => db.getAllFromIndex("records", "state", s)))).flat()),
    /** In the order they were made: by the stamp, which never goes back as a phone's clock may. */
    waiting: () => use((db) => db.getAllFromIndex("records", "state", "waiting")).then((rows) => rows.sort(inOrder)),
    /** Every row there is, for the file that saves the tray. */
    all: () => use((db) => db.getAll("records")).then((rows) => rows.sort(inOrder)),
    /** Forgotten by a failing battery, it is sent once more and answered "already". */
    settle: (receipts, at) => write("records", (store) => Promise.all(receipts.map(async (receipt) => {
      const row = await store.get(receipt.id);
      if (row) await store.put({ ...row, state: "sent", receipt, sent_at: at });
    })), RELAXED),
    /** Sent records that the copy of their site holds by now are only kept from here on. */
    cover: (ids) => write("records", (store) => Promise.all(ids.map(async (id) => {
      const row = await store.get(id);
      if (row?.state === "sent") await store.put({ ...row, state: "kept" });
    })), RELAXED),
    refuse: (id, receipt) => change(id, { state: "refused", receipt }),
    /** Drops kept records whose time is over; what waits, was refused or is in no copy yet is never touched. */
    forget: (now, backedUp) => write("records", async (store) => {
      for (let c = await store.index("state").openCursor("kept"); c; c = await c.continue()) if (isOver(c.value, now, backedUp)) await c.delete();
    }),
    /** Drops what the server has and dropped itself (record.sealed), with its photos; gives how many records went. */
    forgetSealed: (ids) => use(async (db) => {
      const tx = db.transaction(["records", "photos"], "readwrite", STRICT), records = tx.objectStore("records"), photos = tx.objectStore("photos");
      let n = 0;
      for (const id of ids) {
        if (!["sent", "kept"].includes((await records.get(id))?.state)) continue;
        await records.delete(id);
        n++;
      }
      for (let c = await photos.openCursor(); c; c = await c.continue()) if (ids.includes(c.value.entry)) await c.delete();
      await tx.done;
      return n;
    }),
    /** Puts sent records that satisfy lost(row) back to what waits; gives how many. */
    resend: (lost) => write("records", async (store) => {
      let n = 0;
      for (const state of ["sent", "kept"]) {
        for (const row of await store.index("state").getAll(state)) {
          if (!lost(row)) continue;
          await store.put({ ...row, state: "waiting" });
          n++;
        }
      }
      return n;
    }),
    /** Sets a refused record aside: handed over to somebody in a file. It stays on the phone. */
    handOver: (id) => change(id, { state: "handed" }),
    /** Merges a stamp seen elsewhere: what is made next comes after it. */
    sawClock: async (stamp) => {
      const behind = (own) => !own || own < stamp; // 16 digits each: the order of texts is that of stamps
      if (!behind(await use((db) => db.get("me", "clock")))) return;
      await write("me", async (store) => { if (behind(await store.get("clock"))) await store.put(stamp, "clock"); });
    },
    /** Another id for this phone: counts begin anew under it, in the same transaction. */
    renew: ({ installation, token, former }) => use(async (db) => {
      const tx = db.transaction(["me", "counter"], "readwrite", STRICT), me = tx.objectStore("me");
      await Promise.all([me.put(installation, "installation"), me.put(token, "token"), me.put(former, "former"), tx.objectStore("counter").clear(), tx.done]);
    }),

    /**
     * Makes records and keeps them together: counter, stamp, records and the end of their drafts change in one strict
     * transaction, so n has no gap and no double. Each of makes is make({n, clock, installation, person}) → {row, clock,
     * instead} and must not wait for anything; instead is the id of a refused record this one is made for. photos: names
     * of those the first one carries, which wait to be sent from then on.
     */
    keep: (log, draftKeys, makes, photos = []) => use(async (db) => {
      const tx = db.transaction(["me", "counter", "records", "drafts", "photos"], "readwrite", STRICT);
      try {
        const me = tx.objectStore("me"), counter = tx.objectStore("counter");
        const [installation, person, before, last] = await Promise.all([me.get("installation"), me.get("person"), me.get("clock"), counter.get(log)]);
        const mended = [];
        let n = last ?? 0, clock = before;
        const rows = makes.map((make) => {
          const made = make({ n: ++n, clock, installation, person });
          clock = made.clock;
          if (made.instead) mended.push(made.instead);
          return { ...made.row, n, clock, from: installation };
        });
        const records = tx.objectStore("records"), refused = (await Promise.all(mended.map((id) => records.get(id)))).filter(Boolean);
        const shots = (await Promise.all(photos.map((sha) => tx.objectStore("photos").get(sha)))).filter(Boolean);
        await Promise.all([
          ...shots.map((p) => tx.objectStore("photos").put({ ...p, entry: rows[0].id, state: p.state === "sent" ? "sent" : "waiting" })),
          counter.put(n, log), me.put(clock, "clock"), ...rows.map((row) => records.add(row)), ...refused.map((row) => records.put({ ...row, state: "mended" })),
          ...draftKeys.map((key) => tx.objectStore("drafts").delete(key)), tx.done,
        ]);
        return rows;
      } catch (e) {
        try { tx.abort(); } catch { /* already over */ }
        await tx.done.catch(() => {});
        throw e;
      }
    }),
  };
}

/**
 * The `along` database: of each site its copy, {log, snapshot}, and its mark, {log, cursor, org_cursor, taken, whole, size, org_size}: how
 * far the copy goes and when that was last seen to be all. Both change in one transaction; a mark alone may move on.
 */
export function alongDB() {
  const use = connection(openAlong);
  const write = (stores, fn) => use(async (db) => {
    const tx = db.transaction(stores, "readwrite");
    await Promise.all([...fn((name) => tx.objectStore(name)), tx.done]);
  });
  return {
    sites: () => use(async (db) => {
      const tx = db.transaction(["sites", "marks"]);
      const [copies, marks] = await Promise.all([tx.objectStore("sites").getAll(), tx.objectStore("marks").getAll()]);
      const of = new Map(marks.map((m) => [m.log, m]));
      return copies.filter((c) => of.has(c.log)).map((c) => ({ ...of.get(c.log), ...c }));
    }),
    put: ({ snapshot, ...mark }) => write(["sites", "marks"], (store) => [store("sites").put({ log: mark.log, snapshot }), store("marks").put(mark)]),
    mark: ({ snapshot: _, ...mark }) => write(["marks"], (store) => [store("marks").put(mark)]),
    drop: (log) => write(["sites", "marks"], (store) => [store("sites").delete(log), store("marks").delete(log)]),
  };
}
