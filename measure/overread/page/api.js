// Requests to the server of this machine, and nothing else.

const tab = sessionStorage.getItem("tab") ?? crypto.randomUUID();
sessionStorage.setItem("tab", tab);

async function request(path, options) {
  let response;
  try {
    response = await fetch(path, options);
  } catch {
    throw new Error("The server does not answer: start it again, nothing that was answered is lost.");
  }
  if (response.ok) return response;
  const { message } = await response.json();
  throw Object.assign(new Error(message), { status: response.status });
}

const ask = async (path, options) => (await request(path, options)).json();

export const worklist = () => ask("ecgs");

export const open = (number, take) =>
  ask(`ecgs/${number}?tab=${encodeURIComponent(tab)}${take ? "&take=1" : ""}`);

export const change = (number, what, wish) =>
  ask(`ecgs/${number}/${what}`, {
    method: "POST",
    headers: { "Content-Type": "application/json" },
    body: JSON.stringify({ ...wish, tab }),
  });

export const release = (number) =>
  navigator.sendBeacon(`ecgs/${number}/release`, JSON.stringify({ tab }));

export const tile = async ({ number, view }, id) =>
  (await request(`ecgs/${number}/paper/${view}/${id}`)).blob();

export const beside = (number, other) => ask(`ecgs/${number}/beside/${other}/show`);
export const file = (number, kind) => `ecgs/${number}/export/${kind}`;
export const besideFile = (number, other) => `ecgs/${number}/beside/${other}/export`;

// A file to take away, or an error that says why there is none.
export async function take(path) {
  const response = await request(path);
  const name = /filename="([^"]*)"/.exec(response.headers.get("Content-Disposition"))[1];
  const link = document.createElement("a");
  link.href = URL.createObjectURL(await response.blob());
  link.download = name;
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 60000);
}
