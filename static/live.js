// The one module that owns the live channel: newest message wins, one in flight, reconnects by itself.

/** @param {{onMessage: (answer: any) => void, onBinary: (data: ArrayBuffer) => void, onOpen: () => void}} on */
export function openLive(on) {
  /** @type {WebSocket|null} */
  let socket = null;
  let wait = 200;
  let busy = false;
  /** @type {object|null} */
  let next = null;
  const ready = () => socket?.readyState === WebSocket.OPEN;
  const push = () => {
    if (busy || !next || !ready()) return;
    busy = true;
    socket?.send(JSON.stringify(next));
    next = null;
  };
  const connect = () => {
    socket = new WebSocket(`ws://${location.host}/live`);
    socket.binaryType = "arraybuffer";
    socket.onopen = () => { wait = 200; busy = false; on.onOpen(); push(); };
    socket.onclose = () => { busy = false; setTimeout(connect, wait); wait = Math.min(wait * 2, 5000); };
    socket.onmessage = ({ data }) => {
      if (typeof data !== "string") return on.onBinary(data);
      const answer = JSON.parse(data);
      if (answer.type !== "subject") busy = false;
      on.onMessage(answer);
      push();
    };
  };
  connect();
  return {
    /** Ask for a pose and view. @param {object} message */
    turn(message) { next = message; push(); },
    /** Anything that must not be dropped. @param {object} message */
    send(message) { if (ready()) socket?.send(JSON.stringify(message)); },
  };
}
