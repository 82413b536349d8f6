// How the server is asked. All addresses are relative to the page's own, which holds the secret.

/** What the server answered when it could not do what was asked. */
export class Refused extends Error {
  constructor(status, error, body) {
    super(error?.message ?? `The server answered ${status}.`);
    this.status = status;
    this.code = error?.code ?? "unknown";
    this.body = body;
  }
}

/** Fetches plain values. */
export async function get(address, options = {}) {
  return answered(await fetch(address, { cache: "no-store", ...options }));
}

/** Sends plain values. */
export async function post(address, values) {
  const body = JSON.stringify(values);
  const headers = { "Content-Type": "application/json" };
  return answered(await fetch(address, { method: "POST", headers, body }));
}

/** Fetches a picture. */
export async function picture(address) {
  const answer = await fetch(address);
  if (!answer.ok) await answered(answer);
  return createImageBitmap(await answer.blob());
}

/** Reads an answer, or says why there is none. */
async function answered(answer) {
  let values = null;
  try {
    values = await answer.json();
  } catch {
    // Not from this server, or cut short: the status alone tells.
  }
  if (!answer.ok || values === null) {
    const refused = new Refused(answer.status, values?.error, values);
    refused.after = Number(answer.headers.get("Retry-After")) || 1;
    throw refused;
  }
  return values;
}
