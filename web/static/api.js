// The JSON API of the same origin. A failure is an Error whose message can be shown as it is.
export async function get(url, signal) {
  return answer(() => fetch(url, { headers: { Accept: "application/json" }, signal }));
}

export async function post(url, body) {
  return answer(() => fetch(url, {
    method: "POST",
    headers: { "Content-Type": "application/json", Accept: "application/json" },
    body: JSON.stringify(body ?? {}),
  }));
}

export async function postFiles(url, form) {
  return answer(() => fetch(url, { method: "POST", headers: { Accept: "application/json" }, body: form }));
}

async function answer(request) {
  let reply;
  try {
    reply = await request();
  } catch (error) {
    if (error.name === "AbortError") throw error;
    throw new Error("Evenshelf does not answer. Is it still running?");
  }
  const kind = reply.headers.get("Content-Type") ?? "";
  if (reply.ok) {
    return kind.includes("json") ? reply.json() : null;
  }
  if (kind.includes("json")) {
    const problem = await reply.json().catch(() => ({}));
    throw new Error(problem.detail || problem.title || `The server answered ${reply.status}.`);
  }
  throw new Error(`The server answered ${reply.status}.`);
}
