"use strict";
// What the page carries: compressed arrays, opened when they are wanted.
const Carried = (() => {
  const element = (id) => document.getElementById(id);
  const data = JSON.parse(element("data").textContent);

  async function bytes(id) {
    const text = atob(element(id).textContent);
    const raw = new Uint8Array(text.length);
    for (let i = 0; i < text.length; i++) raw[i] = text.charCodeAt(i);
    const stream = new Blob([raw]).stream().pipeThrough(new DecompressionStream("deflate"));
    return new Response(stream).arrayBuffer();
  }
  const text = async (id) => new TextDecoder().decode(await bytes(id));

  // Positions as the page writes them.
  const number = new Intl.NumberFormat("en-US");
  return { data, bytes, text, element, format: (n) => number.format(Math.round(n)) };
})();
