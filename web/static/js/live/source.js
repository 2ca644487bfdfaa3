/** Where progress comes from: Server-Sent Events, which reconnect by themselves; polling where they do not come through. */

const ENDED = new Set(["finished", "failed", "stopped"]);
const KINDS = ["message", "state", "iteration", "mesh", "point", "end"];
const POLL_EVERY = 1500;

/** Call `take` with each event and `ended` once, when the run has ended. */
export function listen({ events, state, take, ended }) {
  let over = false;
  const finish = () => {
    if (over) return;
    over = true;
    ended();
  };
  const poll = async () => {
    while (!over) {
      try {
        const answer = await fetch(state, { headers: { accept: "application/json" }, cache: "no-store" });
        if (answer.status === 404 || answer.status === 410) return finish();
        if (answer.ok && ENDED.has((await answer.json()).state)) return finish();
      } catch {
        // the service is away for a moment: ask again
      }
      await new Promise((resolve) => setTimeout(resolve, POLL_EVERY));
    }
    return undefined;
  };
  if (typeof EventSource === "undefined") return void poll();
  const source = new EventSource(events);
  const handle = ({ data }) => {
    const event = JSON.parse(data);
    take(event);
    if (event.kind === "end" || (event.kind === "state" && ENDED.has(event.state))) {
      source.close();
      finish();
    }
  };
  for (const kind of KINDS) source.addEventListener(kind, handle);
  source.addEventListener("error", () => {
    if (source.readyState === EventSource.CLOSED) poll(); // refused for good; while it is CONNECTING it tries again
  });
  return undefined;
}
