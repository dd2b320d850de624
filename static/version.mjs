// Takes a newer version of the client when it is wise to: the worker that holds it waits until this page says so, and this
// page says so only while no form is open. The page then loads once, never in a circle. The browser's parts are passed in.

const TAKEN = "tripwell-taken"; // the moment this tab last loads for a new version
const CALM = 10_000; // a second load sooner than this would be a circle
const ASK_AGAIN = 1000;
const ASK_MOST = 30;

// As in boot.mjs, which runs before this and cannot be imported: it waits for the client.
const worker = globalThis.trustedTypes?.createPolicy("tripwell-version", { createScriptURL: () => "/sw.js" }).createScriptURL("") ?? "/sw.js";

/** Pages on which nothing is being filled in; every other page counts as an open form. */
const CALM_PAGES = new Set(["sites", "site", "device", "tray", "tag", "along", "find", "hand"]);
export const isCalm = (state) => CALM_PAGES.has(state.route.page) && !state.saving;

/**
 * versions({container, calm, offered, load, session, now, later}) → {start, take, look, calmNow}. container is
 * navigator.serviceWorker or undefined; calm() says that no form is open; offered(yes) tells the page there is something to take.
 */
export function versions({ container, calm, offered, load, session, now, later }) {
  let registration = null, taking = false, owed = false, wanted = false;

  function loadOnce() {
    if (!calm()) { owed = true; return; } // another page took it while a form is open here: after the form
    owed = false;
    if (now() - Number(session.getItem(TAKEN) ?? 0) < CALM) return;
    session.setItem(TAKEN, String(now()));
    load();
  }

  function watch(worker) {
    worker?.addEventListener("statechange", () => { if (worker.state === "installed" && container.controller) offered(true); });
  }

  function take() {
    wanted = Boolean(registration?.waiting) && !calm();
    if (!registration?.waiting || wanted) return false;
    taking = true;
    ask(ASK_MOST);
    return true;
  }

  /**
   * A browser gives up the change when a request reaches the older worker in the same moment, and then says nothing: asked again
   * until it is made. A form that was opened meanwhile waits no less than before.
   */
  function ask(times) {
    if (!registration.waiting || times === 0) return;
    if (!calm()) { wanted = true; return; }
    registration.waiting.postMessage("take over");
    later(() => ask(times - 1), ASK_AGAIN);
  }

  return {
    async start() {
      if (!container) return;
      const had = Boolean(container.controller); // the very first worker takes over a page that is up to date
      container.addEventListener("controllerchange", () => { if (had || taking) loadOnce(); });
      registration = await container.register(worker, { updateViaCache: "none" }).catch(() => null);
      if (!registration) return;
      registration.addEventListener("updatefound", () => watch(registration.installing));
      watch(registration.installing);
      if (registration.waiting && container.controller) offered(true);
    },
    /** Asks the waiting worker to take over; while a form is open or being saved, once that has ended. */
    take,
    /** Looks whether the server has another version; without a line nothing happens. */
    look: () => registration?.update().catch(() => {}),
    /** The page has just become calm: catch up on a load that had to wait. */
    calmNow() {
      if (owed) loadOnce();
      if (wanted) take();
    },
  };
}
