// Requests to the server of this machine, and nothing else.

const tab = sessionStorage.getItem("tab") ?? crypto.randomUUID();
sessionStorage.setItem("tab", tab);

async function answer(response) {
  const content = await response.json();
  if (!response.ok) throw Object.assign(new Error(content.message), { status: response.status });
  return content;
}

async function ask(path, options) {
  let response;
  try {
    response = await fetch(path, options);
  } catch {
    throw new Error("The server does not answer: start it again, nothing that was answered is lost.");
  }
  return answer(response);
}

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

export const picture = (number, view, size) => `ecgs/${number}/paper/${view}/${size}`;
export const file = (number, kind) => `ecgs/${number}/export/${kind}`;
