// The file that carries a tray to another device or to a server by hand, and a refused record made anew. Pure.

/**
 * The whole tray as the parts of a file, one JSON text: every record as the exact string it is, then the photos no server has,
 * {sha256, entry, base64}. In parts, because hundreds of photos in one text would be more than a phone can hold.
 */
export function trayFile(rows, me, at, photos = []) {
  const records = rows.map((row) => ({ record: row.record, state: row.state }));
  const head = JSON.stringify({ tripwell: "tray", v: 1, installation: me.installation, person: me.name, made: new Date(at).toISOString(), records });
  return [head.slice(0, -1), ',"photos":[', ...photos.map((p, i) => (i > 0 ? "," : "") + JSON.stringify(p)), "]}"];
}

/** Name of the file: who and when. */
export const trayFileName = (me, at) => `tripwell-tray-${new Date(at).toISOString().slice(0, 16).replace(/[:T]/g, "-")}-${(me.installation ?? "").slice(-6)}.json`;

/** Whether a record can still be read, so that it can be made again; one that was damaged on the phone cannot. */
export function isReadable(row) {
  try {
    return typeof JSON.parse(row.record).body === "object";
  } catch {
    return false;
  }
}

/**
 * What a refused record says, for a new record in its place: the same thing at the same time, with an id, a count and a stamp of
 * its own and by whoever is signed in now.
 */
export function saidAgain(row) {
  const { kind, log, subject, at, body } = JSON.parse(row.record);
  return { kind, log, subject, at: Date.parse(at), body };
}
