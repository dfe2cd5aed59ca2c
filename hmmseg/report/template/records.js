"use strict";
// Records, longest first, with their bins; a block of bins is opened when one of its records is.
async function openRecords() {
  const { data } = Carried;
  const list = JSON.parse(await Carried.text("records-data"));
  const holes = new Uint32Array(await Carried.bytes("holes"));
  const names = list.names, lengths = list.lengths;
  const rank = new Map(names.map((name, i) => [name, i]));
  const firstHole = new Uint32Array(names.length + 1);
  for (let i = 0; i < list.holes.length; i++) firstHole[i + 1] = firstHole[i] + list.holes[i];
  const opened = new Map();

  function block(record) {
    const at = data.blocks.findIndex((b) => record < b.first + b.count);
    if (!opened.has(at)) opened.set(at, Carried.bytes("bins-" + at).then((b) => new Uint8Array(b)));
    return opened.get(at).then((content) => [data.blocks[at], content]);
  }

  // All tracks of a record: {lowest, mean, highest} for each state, and gc.
  async function bins(record) {
    const [own, content] = await block(record);
    let skipped = 0, total = 0;
    for (let i = own.first; i < own.first + own.count; i++) {
      const n = Math.ceil(lengths[i] / data.bin);
      if (i < record) skipped += n;
      total += n;
    }
    const n = Math.ceil(lengths[record] / data.bin);
    const plane = (p) => content.subarray(p * total + skipped, p * total + skipped + n);
    const states = data.states.map((_, s) => ({
      lowest: plane(3 * s), mean: plane(3 * s + 1), highest: plane(3 * s + 2),
    }));
    return { states, gc: data.gc ? plane(3 * data.states.length) : null };
  }

  function gaps(record) {
    const out = [];
    for (let i = firstHole[record]; i < firstHole[record + 1]; i++) out.push([holes[2 * i], holes[2 * i + 1]]);
    return out;
  }
  return { names, lengths, rank, bins, gaps };
}
