// Reads codes out of pictures: by the browser's own reader where it has one for QR codes, else by a decoder in JavaScript,
// which is fetched only then. Gives reader(video) → Promise of the code's text or null. Never opens what it reads.

const LONG_SIDE = 720; // pixels a label's 25 modules need no more of

/** parts: {Detector, load, canvas} for other surroundings than a page. */
export async function codeReader({ Detector = globalThis.BarcodeDetector, load = () => import("./vendor/qr-decode.mjs"), canvas = () => document.createElement("canvas") } = {}) {
  if (Detector && (await Detector.getSupportedFormats().catch(() => [])).includes("qr_code")) {
    const detector = new Detector({ formats: ["qr_code"] });
    return async (video) => (await detector.detect(video).catch(() => []))[0]?.rawValue ?? null;
  }
  const { decodeQR } = await load();
  const board = canvas(), pen = board.getContext("2d", { willReadFrequently: true });
  return async (video) => {
    const shrink = Math.min(1, LONG_SIDE / Math.max(video.videoWidth, video.videoHeight));
    const width = Math.round(video.videoWidth * shrink), height = Math.round(video.videoHeight * shrink);
    if (!width || !height) return null;
    board.width = width;
    board.height = height;
    pen.drawImage(video, 0, 0, width, height);
    try {
      return decodeQR(pen.getImageData(0, 0, width, height)) ?? null;
    } catch {
      return null; // no code in this picture
    }
  };
}
