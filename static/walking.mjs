// What a walk does: rounds made in the office as they stand here, the walk of the day without one, where a test stands on
// either, what is passed over, the tester proved, the end.

import { placeInRound } from "./list.mjs";
import { nextInWalk, nextStop, passedBy, roundsHere } from "./walk-round.mjs";

/** app: the state's readers, `write` and `remember`; parts: {now, siteView}. */
export function walking(app, { now, siteView }) {
  const { state, say } = app;

  /** Rounds made in the office that this person may walk at a site, own tests laid over. */
  const roundsOf = (site) => {
    const walk = state.me.rounds?.[site.log] ?? {};
    return site.once(`rounds ${state.me.person} ${walk.id} ${walk.given} ${walk.taken}`, () => roundsHere(site.snapshot.rounds, state.records.filter((r) => r.log === site.log), state.me.person, state.offset ?? 0, walk));
  };

  /** What this phone keeps of its walk at a site: of a round made in the office until that is ended, else of the day. */
  function roundOf(site) {
    const round = state.me.rounds?.[site.log];
    if (round?.id ? roundsOf(site).some((r) => r.id === round.id) : round?.day === site.today) return round;
    return { day: site.today, skipped: [], proved: {} };
  }
  const setRound = (site, change) => app.remember("rounds", { ...state.me.rounds, [site.log]: { ...roundOf(site), ...change } });

  /** The round made in the office that is being walked at a site, undefined where none is. */
  const walked = (site) => roundsOf(site).find((r) => r.id === roundOf(site).id);
  const passed = (site) => roundOf(site).passed ?? [];

  /** Not walked to here: passed over, or handed to a colleague. */
  const skipped = (site) => new Set([...roundOf(site).skipped, ...(roundOf(site).given ?? [])]);
  /** Within what a colleague handed over the walk stays in it. */
  function walkOf(site, device) {
    const taken = new Set(roundOf(site).taken);
    return taken.has(device) ? site.devices.filter((d) => taken.has(d.id)) : site.devices;
  }

  return {
    roundsOf, roundOf, passed, walking: walked,
    /** Those of all sites on the phone. */
    rounds: () => [...state.sites.keys()].map(siteView).flatMap((site) => roundsOf(site).map((round) => ({ site, round }))),
    startRound: (site, id) => setRound(site, { id, day: site.today, skipped: [], proved: {}, passed: [] }),
    /** Where a test stands on the walk: {round: {n, of}, next: {device, task} | null, onRound}. */
    placeOnWalk(site, stop, corrects) {
      const round = walked(site), at = round ? round.stops.findIndex((s) => s.device === stop.device && s.task === stop.task) : -1;
      if (at >= 0 && !corrects) return { round: { n: at + 1, of: round.stops.length }, next: nextStop(round.stops, stop, passed(site)) ?? null, onRound: round };
      const next = corrects ? null : nextInWalk(walkOf(site, stop.device), stop.device, stop.task, site.today, skipped(site));
      return { round: site.once(`place ${stop.device} ${stop.task}`, () => placeInRound(site.devices, stop.device, stop.task, site.today)), next: next && { device: next.id, task: stop.task } };
    },
    /** Passes a stop of the round over; reason null takes it back. */
    passOver(site, { device, task }, reason) {
      const rest = passed(site).filter((p) => !(p.device === device && p.task === task));
      setRound(site, { passed: reason ? [...rest, { device, task, reason }] : rest });
    },
    skipped, taken: (site) => new Set(roundOf(site).taken ?? []),
    /** A colleague walks these from now on; an empty list takes them back. */
    giveAway: (site, ids) => setRound(site, { given: ids.length === 0 ? [] : [...new Set([...(roundOf(site).given ?? []), ...ids])], taken: (roundOf(site).taken ?? []).filter((id) => !ids.includes(id)) }),
    /** What a colleague handed over is walked here; round: of one made in the office. */
    takeOn(site, ids, round) {
      const had = roundOf(site).id === round ? roundOf(site).taken ?? [] : [];
      if (round) return app.remember("rounds", { ...state.me.rounds, [site.log]: { id: round, day: site.today, skipped: [], proved: roundOf(site).proved ?? {}, passed: [], taken: [...new Set([...had, ...ids])] } });
      return setRound(site, { taken: [...new Set([...(roundOf(site).taken ?? []), ...ids])], given: (roundOf(site).given ?? []).filter((id) => !ids.includes(id)), skipped: roundOf(site).skipped.filter((id) => !ids.includes(id)) });
    },
    skip: (site, device) => setRound(site, { skipped: [...new Set([...roundOf(site).skipped, device.id])] }),
    unskip: (site) => setRound(site, { skipped: [] }),
    /** works null takes it back. */
    prove: (site, end, works) => setRound(site, { proved: { ...roundOf(site).proved, [end]: works === null ? undefined : { at: now(), works } } }),
    /** Ends the walk. A part that was taken over is a walk of its own: the round itself is ended by whom it was given to. */
    async closeRound(site, counts) {
      const made = walked(site), over = (made?.stops ?? []).filter((s) => s.state === "" && passedBy(passed(site), s)).map(({ device, task }) => ({ device, task, reason: passedBy(passed(site), { device, task }) }));
      const body = { day: site.today, ...counts, proved: provedOf(roundOf(site)), ...(state.me.instrument ? { instrument: state.me.instrument } : {}), ...(over.length > 0 ? { passed: over } : {}) };
      if (!(await app.write(site, [{ kind: "round.closed", subject: made && !(roundOf(site).taken?.length > 0) ? made.id : app.newId(), body }], { said: say("walk.round_of", { what: site.snapshot.site.name }) }))) return false;
      const rest = { ...state.me.rounds };
      delete rest[site.log];
      app.remember("rounds", rest);
      return true;
    },
  };
}

const provedOf = ({ proved }) => Object.fromEntries(Object.entries(proved).filter(([, p]) => p).map(([end, p]) => [end, { at: new Date(p.at).toISOString(), works: p.works }]));
