// The live stream. Each message hands over what it carries; the browser reconnects by
// itself and goes on after the last event that arrived.

export function listen(handlers) {
  let source = null;
  let heard = performance.now();
  const begin = () => {
    source = new EventSource("/api/v1/stream" + (last ? "?last_event_id=" + last : ""));
    source.onopen = () => { heard = performance.now(); handlers.connected(true); };
    source.onerror = () => {
      handlers.connected(false);
      if (source.readyState === EventSource.CLOSED) setTimeout(begin, 2000);
    };
    for (const name of ["station", "run", "event", "trouble"]) {
      source.addEventListener(name, (message) => {
        heard = performance.now();
        if (name === "event") last = message.lastEventId;
        handlers[name]?.(JSON.parse(message.data));
      });
    }
  };
  let last = "";
  begin();
  // A line that went dead without saying so is noticed by its silence.
  setInterval(() => { if (performance.now() - heard > 4000) handlers.connected(false); }, 500);
  return { end: () => source.close() };
}
