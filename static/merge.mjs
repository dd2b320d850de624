// Merging of register fields: what several records say of one field. Says the same as store/record/merge.go.
// A saying is {value, clock: BigInt, id, from, seen: BigInt}; value null clears the field; seen is the largest stamp of
// the subject its author knew of (0n: none).

/** All that was said of one field in order, the winner first: the largest (clock, id) wins, the order of arrival has no say. */
export function weigh(said) {
  const sorted = [...said].sort((a, b) => (a.clock !== b.clock ? (a.clock < b.clock ? 1 : -1) : a.id < b.id ? 1 : a.id > b.id ? -1 : 0));
  return sorted.filter((s, i) => i === 0 || s.id !== sorted[i - 1].id);
}

/** Of sayings in the order weigh gives: other values, from other installations, that the winner's author did not know of. */
export function losers(said) {
  const winner = said[0];
  return said.slice(1).filter((s) => s.clock > winner.seen && s.from !== winner.from && JSON.stringify(s.value) !== JSON.stringify(winner.value));
}
