// The first thing the page of the field client runs. Where no worker answers yet, it waits for one to lay the client in,
// so that a phone fetches it once, in one piece, and not file by file. Whatever goes wrong with that, the client starts.

const LONGEST = 60_000; // a line that has not brought a hundred kilobytes by then will not bring them sooner another way

// The content policy asks that addresses of scripts pass through a policy; this one knows a single address.
const worker = globalThis.trustedTypes?.createPolicy("tripwell-boot", { createScriptURL: () => "/sw.js" }).createScriptURL("") ?? "/sw.js";

/** Resolves when a worker answers this page, or when none will. */
async function answered(container) {
  if (!container || container.controller) return;
  const registration = await container.register(worker, { updateViaCache: "none" });
  const coming = registration.installing ?? registration.waiting;
  if (!coming) return; // loaded past the worker on purpose
  await new Promise((done) => {
    container.addEventListener("controllerchange", done, { once: true });
    coming.addEventListener("statechange", () => { if (coming.state === "redundant") done(); });
    setTimeout(done, LONGEST);
  });
}

await answered(navigator.serviceWorker).catch(console.error); // no worker to be had: the client runs without
await import("./field.mjs");
