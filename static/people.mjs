// The people who share this phone: everybody who signed in on it, each with a PIN of their own to come back by without a
// line. Who is named here is who makes the next entries. Storage is passed in.

import { afterWrong, fitsPin, sealPin } from "./pin.mjs";

/** me.people: {person id: {name, pin: {salt, rounds, hash}, wrong, until}}. */
export function peopleHere(app, { tray, now }) {
  const { state } = app;
  async function put(person, row) {
    state.me.people = { ...state.me.people, [person]: row };
    await tray.setMe("people", state.me.people);
    app.draw();
  }
  return {
    people: () => Object.entries(state.me.people ?? {}).map(([id, row]) => ({ id, name: row.name, hasPin: Boolean(row.pin), until: row.until ?? 0, here: id === state.me.person })).sort((a, b) => (a.name < b.name ? -1 : 1)),
    /** The PIN of whoever makes the entries now; before is the one they had. Resolves to words for what is wrong, or null. */
    async setPin(pin, before) {
      const { person, name } = state.me, row = state.me.people?.[person] ?? { name };
      if (row.pin) {
        const wrong = await tried(person, row, before);
        if (wrong) return wrong;
      }
      await put(person, { name: row.name, pin: await sealPin(pin) });
      return null;
    },
    /** Another of the phone's people makes the entries from now on. */
    async switchTo(person, pin) {
      const row = state.me.people?.[person];
      if (!row?.pin) return "phone.pin_none";
      const wrong = await tried(person, row, pin);
      if (wrong) return wrong;
      await put(person, { name: row.name, pin: row.pin });
      await tray.become(person, row.name);
      Object.assign(state.me, { person, name: row.name });
      app.changed();
      return null;
    },
  };

  async function tried(person, row, pin) {
    if ((row.until ?? 0) > now()) return "phone.pin_wait";
    if (await fitsPin(pin, row.pin)) return null;
    const after = afterWrong(row, now());
    await put(person, after);
    return after.until > now() ? "phone.pin_wait" : "phone.pin_wrong";
  }
}
