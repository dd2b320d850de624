// The phone's two databases. `tray` holds what is ours alone: who we are, the counters, the records and the drafts; no
// reset ever drops it. `along` holds copies of the server's data and may be dropped whole. What is a record's is written
// strictly: the promise resolves when the transaction is complete on disk, and rejects when it is aborted. Drafts are
// written at every keystroke and survive the end of the page, not the loss of power in the same second.

import { openDB, unwrap } from "./vendor/idb.mjs";

const STRICT = { durability: "strict" };

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
  return openDB("along", 1, {
    upgrade(db) {
      db.createObjectStore("sites", { keyPath: "log" });
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

    drafts: () => use((db) => db.getAll("drafts")),
    photo: (sha256) => use((db) => db.get("photos", sha256)),
    putPhoto: (row) => write("photos", async (store) => { if (!(await store.get(row.sha256))) await store.put(row); }),
    dropPhoto: (sha256) => write("photos", async (store) => { if ((await store.get(sha256))?.state === "draft") await store.delete(sha256); }),
    waitingPhotos: () => use((db) => db.getAllFromIndex("photos", "state", "waiting")).then((rows) => rows.sort((a, b) => a.saved - b.saved)),
    settlePhoto: (sha256, at) => write("photos", async (store) => {
      const row = await store.get(sha256);
      if (row) await store.put({ ...row, state: "sent", sent_at: at });
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
    putDraft: (draft) => write("drafts", (store) => store.put(draft), { durability: "relaxed" }),

    /** What pages show: all that is not yet in a copy of the server's data. */
    records: () => use(async (db) => (await Promise.all(["waiting", "refused", "sent"].map((s) => db.getAllFromIndex("records", "state", s)))).flat()),
    waiting: () => use((db) => db.getAllFromIndex("records", "state", "waiting")).then((rows) => rows.sort((a, b) => a.saved - b.saved || (a.n ?? 0) - (b.n ?? 0) || (a.id < b.id ? -1 : 1))),
    settle: (id, receipt, at) => change(id, { state: "sent", receipt, sent_at: at }),
    /** Sent records that the copy of their site holds by now are only kept from here on. */
    cover: (ids) => write("records", async (store) => {
      for (const id of ids) {
        const row = await store.get(id);
        if (row?.state === "sent") await store.put({ ...row, state: "kept" });
      }
    }),
    refuse: (id, receipt) => change(id, { state: "refused", receipt }),
    /** Drops kept records sent before a moment; what waits, was refused or is in no copy yet is never touched. */
    forget: (before) => write("records", async (store) => {
      for (let c = await store.index("state").openCursor("kept"); c; c = await c.continue()) if (c.value.sent_at < before) await c.delete();
    }),

    /**
     * Makes records and keeps them together: counter, stamp, records and the end of their drafts change in one strict
     * transaction, so n has no gap and no double. Each of makes is make({n, clock, installation, person}) → {row, clock}
     * and must not wait for anything. photos: names of those the first one carries, which wait to be sent from then on.
     */
    keep: (log, draftKeys, makes, photos = []) => use(async (db) => {
      const tx = db.transaction(["me", "counter", "records", "drafts", "photos"], "readwrite", STRICT);
      try {
        const me = tx.objectStore("me"), counter = tx.objectStore("counter");
        const [installation, person, before, last] = await Promise.all([me.get("installation"), me.get("person"), me.get("clock"), counter.get(log)]);
        let n = last ?? 0, clock = before;
        const rows = makes.map((make) => {
          const made = make({ n: ++n, clock, installation, person });
          clock = made.clock;
          return { ...made.row, n };
        });
        const shots = (await Promise.all(photos.map((sha) => tx.objectStore("photos").get(sha)))).filter(Boolean);
        await Promise.all([
          ...shots.map((p) => tx.objectStore("photos").put({ ...p, entry: rows[0].id, state: p.state === "sent" ? "sent" : "waiting" })),
          counter.put(n, log), me.put(clock, "clock"), ...rows.map((row) => tx.objectStore("records").add(row)),
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

/** The `along` database: one row per site, {log, taken, snapshot}; the cursor is inside, so both change at once. */
export function alongDB() {
  const use = connection(openAlong);
  return {
    sites: () => use((db) => db.getAll("sites")),
    put: (row) => use((db) => db.put("sites", row)),
    drop: (log) => use((db) => db.delete("sites", log)),
  };
}
