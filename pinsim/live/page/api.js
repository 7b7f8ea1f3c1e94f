// Every word with the server goes through here. The page computes no figure: it asks.

const client = Array.from(crypto.getRandomValues(new Uint8Array(8)), (b) => b.toString(16).padStart(2, "0")).join("");

export class Refused extends Error {
  // What the server said no to: one line for people, and the field to blame if there is one.
  constructor(answer, status) {
    super(answer.error || `the server answered ${status}`);
    this.field = answer.field || null;
    this.errors = answer.errors || null;
    this.needs = answer.needs || null;
    this.superseded = Boolean(answer.superseded);
  }
}

export class Gone extends Error {
  constructor() {
    super("pinsim live does not answer: is it still running in its terminal? The picture shown is the last one it drew.");
  }
}

async function call(path, options) {
  let response;
  try {
    response = await fetch(path, options);
  } catch (error) {
    if (error.name === "AbortError") throw error;
    throw new Gone();
  }
  if (response.ok) return response;
  let answer = {};
  try {
    answer = await response.json();
  } catch { /* not from our server; the status must do */ }
  throw new Refused(answer, response.status);
}

const post = (path, body, signal) => call(path, {
  method: "POST",
  headers: { "Content-Type": "application/json", "X-Pinsim-Client": client },
  body: JSON.stringify(body),
  signal,
});

const json = async (path, body, signal) => (await post(path, body, signal)).json();

const put = async (path, file) => (await call(`${path}?name=${encodeURIComponent(file.name)}`, {
  method: "PUT",
  headers: { "Content-Type": "application/octet-stream", "X-Pinsim-Client": client },
  body: file,
})).json();

export const start = async () => (await call("/api/start")).json();
export const parse = (kind, text, field) => json("/api/parse", { kind, text, field });
export const check = (state) => json("/api/check", { state });
export const numbers = (state, part, lane, signal) => json("/api/numbers", { state, part, lane }, signal);
export const curves = (state, lane, signal) => json("/api/curves", { state, lane }, signal);
export const point = (state, x, y, signal) => json("/api/point", { state, x, y }, signal);
export const difference = (state, other, signal) => json("/api/difference", { state, other }, signal);
export const design = (state) => json("/api/design", { state });
export const openDesign = (toml, fileName) => json("/api/open", { toml, file_name: fileName });
export const sendPhoto = (file) => put("/api/photo", file);
export const sendMap = (file) => put("/api/map", file);

export async function picture(state, widthPx, lane, signal) {
  const response = await post("/api/picture", { state, width_px: widthPx, lane }, signal);
  const about = JSON.parse(response.headers.get("X-Pinsim"));
  const bitmap = await createImageBitmap(await response.blob());
  return { bitmap, about };
}

export async function save(body) {
  const response = await post("/api/save", body);
  const about = JSON.parse(response.headers.get("X-Pinsim") || "{}");
  hand(await response.blob(), about.file_name || `pinsim${body.format}`);
  return about;
}

export function hand(blob, fileName) {
  // Gives a file to the browser's own saving.
  const link = document.createElement("a");
  link.href = URL.createObjectURL(blob);
  link.download = fileName;
  document.body.append(link);
  link.click();
  link.remove();
  setTimeout(() => URL.revokeObjectURL(link.href), 60_000);
}
