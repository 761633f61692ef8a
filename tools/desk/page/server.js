// Talks to the server. Every refusal comes back as an Error whose message is the server's one line.

async function answer(response) {
  const text = await response.text();
  let data = {};
  try {
    data = text ? JSON.parse(text) : {};
  } catch {
    data = { problems: [text.trim()] };
  }
  if (!response.ok) {
    const error = new Error((data.problems || [`the server answered ${response.status}`]).join('\n'));
    error.status = response.status;
    throw error;
  }
  return data;
}

export async function get(path, parameters = {}) {
  const query = new URLSearchParams(parameters).toString();
  return answer(await fetch(query ? `${path}?${query}` : path, { cache: 'no-store' }));
}

export async function post(path, body) {
  return answer(await fetch(path, {
    method: 'POST', headers: { 'Content-Type': 'application/json' }, body: JSON.stringify(body ?? {}),
  }));
}

export async function upload(path, parameters, file) {
  const query = new URLSearchParams(parameters).toString();
  return answer(await fetch(`${path}?${query}`, {
    method: 'POST', headers: { 'Content-Type': 'application/octet-stream' }, body: file,
  }));
}

// Runs `ask(value)` for the newest value only: while one question is open, newer values replace
// each other, so that nothing queues up behind a drag.
export function newestOnly(ask, show) {
  let open = false;
  let waiting = null;
  return async function put(value) {
    if (open) {
      waiting = { value };
      return;
    }
    open = true;
    try {
      show(await ask(value), value);
    } catch (error) {
      show(null, value, error);
    }
    open = false;
    if (waiting) {
      const next = waiting.value;
      waiting = null;
      put(next);
    }
  };
}
