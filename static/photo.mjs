// A photo as it is kept: drawn anew on the phone, at most 1600 pixels on its long side, so that nothing of the camera's own
// file is left in it (where, when, with what), and named by the SHA-256 of the bytes that are kept.

export const MOST_PHOTOS = 4;
const LONG_SIDE = 1600;
const QUALITY = 0.8;

/** Width and height that fit, never enlarged. */
export function fitted(width, height, most = LONG_SIDE) {
  const shrink = Math.min(1, most / Math.max(width, height));
  return { width: Math.max(1, Math.round(width * shrink)), height: Math.max(1, Math.round(height * shrink)) };
}

/** Lower-case hexadecimal SHA-256. */
export async function sha256Of(bytes) {
  return [...new Uint8Array(await crypto.subtle.digest("SHA-256", bytes))].map((b) => b.toString(16).padStart(2, "0")).join("");
}

/** {sha256, blob} of a file the person chose; throws where it is no picture. */
export async function photoOf(file) {
  const picture = await createImageBitmap(file, { imageOrientation: "from-image" });
  const { width, height } = fitted(picture.width, picture.height);
  const board = Object.assign(document.createElement("canvas"), { width, height });
  board.getContext("2d").drawImage(picture, 0, 0, width, height);
  picture.close();
  const blob = await new Promise((yes, no) => board.toBlob((b) => (b ? yes(b) : no(new Error("no picture made"))), "image/jpeg", QUALITY));
  return { sha256: await sha256Of(await blob.arrayBuffer()), blob };
}
