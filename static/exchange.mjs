// Talks to the server's exchange. fetch and now are passed in. Answers are {ok, status, body, offset} or {ok:false, status:0}
// when the server was not reached; nothing here throws for what a network does. Pure but for the fetch it is given.

/** Milliseconds the server's clock is ahead of ours, from the Date header (whole seconds) and half the round trip. */
export function clockOffset(dateHeader, started, ended) {
  const server = Date.parse(dateHeader ?? "");
  if (Number.isNaN(server)) return null;
  return Math.round(server + 500 - (started + ended) / 2);
}

/** exchange({fetch, now}) → calls of the end points a phone needs. */
export function exchange({ fetch, now }) {
  async function call(path, { token, method = "GET", body, type = "application/json" } = {}) {
    const headers = { Accept: "application/json" };
    if (token) headers.Authorization = `Bearer ${token}`;
    if (body !== undefined) headers["Content-Type"] = type;
    const started = now();
    let answer;
    try {
      answer = await fetch(path, { method, headers, body, cache: "no-store", credentials: "same-origin", redirect: "error" });
    } catch {
      return { ok: false, status: 0, body: null, offset: null };
    }
    const offset = clockOffset(answer.headers.get("Date"), started, now());
    let parsed = null;
    try {
      parsed = await answer.json();
    } catch {
      // An answer cut short, or a page put in between by somebody's network: not ours, so nothing was decided.
      return { ok: false, status: answer.ok ? 0 : answer.status, body: null, offset };
    }
    return { ok: answer.ok, status: answer.status, body: parsed, offset, retryAfter: Number(answer.headers.get("Retry-After")) || 0 };
  }
  return {
    enrol: (installation) => call("/exchange/enrol", { method: "POST", body: JSON.stringify({ installation }) }),
    logs: (token) => call("/exchange/logs", { token }),
    snapshot: (token, site) => call(`/exchange/snapshot?log=${encodeURIComponent(site)}`, { token }),
    photo: (token, { sha256, entry, blob }) => call(`/exchange/photo?sha256=${sha256}&entry=${encodeURIComponent(entry)}`, { token, method: "POST", body: blob, type: "image/jpeg" }),
    pull: (token, log, after, limit) => call(`/exchange/pull?log=${encodeURIComponent(log)}&after=${encodeURIComponent(after)}&limit=${limit}`, { token }),
    ask: (token, ids) => call("/exchange/ask", { token, method: "POST", body: JSON.stringify({ ids }) }),
    entry: (token, id) => call(`/exchange/entry?id=${encodeURIComponent(id)}`, { token }),
    head: (token, log, from, own) => call(`/exchange/head?log=${encodeURIComponent(log)}&from=${from}&own=${own}`, { token }),
    tellHead: (token, head) => call("/exchange/head", { token, method: "POST", body: JSON.stringify(head) }),
    renew: (token, installation) => call("/exchange/renew", { token, method: "POST", body: JSON.stringify({ installation }) }),
    push: (token, body) => call("/exchange/push", { token, method: "POST", body }),
  };
}
