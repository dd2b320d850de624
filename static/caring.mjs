// What a person does about what this phone keeps: choose sites, save the tray to a file, make a refused record again or
// hand it over. Storage and the browser's parts are passed in.

import { saidAgain, trayFile, trayFileName } from "./rescue.mjs";

/** Bytes as JSON carries them. */
async function base64Of(blob) {
  const bytes = new Uint8Array(await blob.arrayBuffer());
  let text = "";
  for (let i = 0; i < bytes.length; i += 0x8000) text += String.fromCharCode(...bytes.subarray(i, i + 0x8000));
  return btoa(text);
}

export function caring({ app, tray, now, make, choose, send, download }) {
  async function reread() {
    app.state.records = await tray.records();
    app.changed();
  }
  return {
    async chooseSite(log, yes) {
      await choose(log, yes);
      if (yes) send();
    },
    async saveTray() {
      const at = now();
      const photos = [];
      for (const { sha256, entry, blob } of await tray.unsentPhotos()) photos.push({ sha256, entry, base64: await base64Of(blob) });
      await download(trayFileName(app.state.me, at), trayFile(await tray.all(), app.state.me, at, photos));
    },
    /** The refused record stays in the tray's store, marked as mended by the new one. */
    async sayAgain(row) {
      const said = saidAgain(row);
      await tray.keep(said.log, [], [(facts) => {
        const made = make({ ...said, offset: app.state.offset ?? 0, ...facts });
        const { receipt: _, ...same } = row;
        return { clock: made.clock, instead: row.id, row: { ...same, id: made.id, record: made.record, state: "waiting", summary: row.summary && { ...row.summary, entry: made.id } } };
      }]);
      await reread();
      send();
    },
    async handOverPhoto(sha256) {
      await tray.handOverPhoto(sha256);
      app.state.refusedPhotos = await tray.refusedPhotos();
      app.changed();
    },
    async handOver(row) {
      await tray.handOver(row.id);
      await reread();
    },
  };
}
