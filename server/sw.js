// The worker that opens the field client without a line. The server writes BUILD before this text: {cache, shell, root,
// files:[[name, bytes]…], words:{language:[name, bytes]}, packs:{language:[name, SHA-256 in hex]}, alone:[[name, SHA-256]…]}.
// Files and words of one language come as one pack, behind one another; what the page fetches before it, and what draws and
// reads codes, comes by itself. It answers navigations to the field client and to labels, and the files it laid in; everything else, and whatever is no GET, goes past
// it as if it were not there.

const OWN = "tripwell-field-"; // every cache of ours is named so; no other is touched
const KEPT_CACHES = 2; // ours and the one before: a page that is still open with a form in it may want a file of that one

/** The first language of the phone's wishes that there is. */
function language() {
  const wishes = [...(self.navigator.languages ?? []), "en"].map((wish) => wish.slice(0, 2).toLowerCase());
  return wishes.find((lang) => BUILD.words[lang]);
}

/** The last, which reads codes, only where the browser does not itself. */
async function aloneFiles() {
  const reads = (await self.BarcodeDetector?.getSupportedFormats().catch(() => []))?.includes("qr_code");
  return reads ? BUILD.alone.slice(0, -1) : BUILD.alone;
}

/** Lays the whole build in or nothing: a worker with half of it would break the client where there is no line to mend it. */
async function layIn() {
  const lang = language(), inPack = [...BUILD.files, BUILD.words[lang]], alone = await aloneFiles();
  if (await whole([...inPack, ...alone])) return;
  const cache = await caches.open(BUILD.cache);
  try {
    await Promise.all([layShell(cache), layPack(cache, BUILD.packs[lang], inPack), ...alone.map(async (file) => lay(cache, file[0], await fetched(file)))]);
  } catch (e) {
    await caches.delete(BUILD.cache);
    throw e;
  }
}

/** Whether every file of this build is here already: the same worker installed once more. */
async function whole(files) {
  if (!(await caches.has(BUILD.cache))) return false;
  const here = new Set((await (await caches.open(BUILD.cache)).keys()).map((request) => new URL(request.url).pathname));
  return here.has(BUILD.shell) && files.every(([name]) => here.has(BUILD.root + name));
}

/** The page must be the one that asks for this build's files; the server may have been replaced a moment ago. */
async function layShell(cache) {
  const answer = await fetch(BUILD.shell, { cache: "no-store", redirect: "error" });
  if (!answer.ok || !(await answer.clone().text()).includes(`${BUILD.root}boot.mjs`)) throw new Error(`${BUILD.shell} is of another build`);
  await cache.put(BUILD.shell, answer);
}

/** Every file is the very file the server was built with; a page put in between by somebody's network is not. */
async function fetched([name, sha256]) {
  const answer = await fetch(BUILD.root + name, { redirect: "error" });
  const bytes = answer.ok ? await answer.arrayBuffer() : null;
  if (!bytes || hex(await crypto.subtle.digest("SHA-256", bytes)) !== sha256) throw new Error(`${name} did not come whole`);
  return bytes;
}

const KINDS = { mjs: "text/javascript; charset=utf-8", css: "text/css; charset=utf-8", json: "application/json", svg: "image/svg+xml" };

const lay = (cache, name, bytes) => cache.put(BUILD.root + name, new Response(bytes, { headers: { "Content-Type": KINDS[name.split(".").pop()], "X-Content-Type-Options": "nosniff" } }));

async function layPack(cache, pack, files) {
  const bytes = await fetched(pack);
  let from = 0;
  await Promise.all(files.map(([name, size]) => lay(cache, name, bytes.slice(from, (from += size)))));
}

const hex = (bytes) => [...new Uint8Array(bytes)].map((b) => b.toString(16).padStart(2, "0")).join("");

async function clearOld() {
  const own = (await caches.keys()).filter((name) => name.startsWith(OWN) && name !== BUILD.cache); // in the order they were made
  await Promise.all(own.slice(0, Math.max(0, own.length - (KEPT_CACHES - 1))).map((name) => caches.delete(name)));
}

const isFile = new RegExp(`^/assets/[0-9a-f]{16}/`);
const fileNames = new Set([...BUILD.files, ...Object.values(BUILD.words), ...BUILD.alone].map(([name]) => name));

/** What of ours a request asks for: "shell", "file" or null. */
function oursOf(request) {
  const url = new URL(request.url);
  if (request.method !== "GET" || url.origin !== self.location.origin) return null;
  if (request.mode === "navigate") return /^\/(field(\/|$)|t\/)/i.test(url.pathname) && !url.searchParams.has("past") ? "shell" : null;
  return isFile.test(url.pathname) && fileNames.has(url.pathname.replace(isFile, "")) ? "file" : null;
}

async function answer(request, what) {
  const options = { ignoreVary: true };
  const kept = what === "shell" ? await (await caches.open(BUILD.cache)).match(BUILD.shell, options) : await ownMatch(request, options);
  return kept ?? fetch(request);
}

async function ownMatch(request, options) {
  for (const name of (await caches.keys()).filter((n) => n.startsWith(OWN)).reverse()) {
    const kept = await (await caches.open(name)).match(request, options);
    if (kept) return kept;
  }
  return undefined;
}

/** The exchange goes past the worker altogether where a browser can be told so: a worker with a request under way holds up the next. */
const pastUs = (e) => e.addRoutes?.({ condition: { urlPattern: "/exchange/*" }, source: "network" }).catch(() => {});

self.addEventListener("install", (e) => e.waitUntil(Promise.all([layIn(), pastUs(e)])));
self.addEventListener("activate", (e) => e.waitUntil(clearOld().then(() => self.clients.claim())));
self.addEventListener("fetch", (e) => {
  const what = oursOf(e.request);
  if (what) e.respondWith(answer(e.request, what));
});
self.addEventListener("message", (e) => { if (e.data === "take over") e.waitUntil(self.skipWaiting()); });
