// Lets the service worker keep the weigh-out for a time without network, where the browser has one: over https, or on
// the machine itself. It is told whose page this is, so that it drops what it keeps of anybody else.
const { member = "", kept } = document.body.dataset;

if ("serviceWorker" in navigator) {
  const alone = !navigator.serviceWorker.controller;
  navigator.serviceWorker.register("/service-worker.js", { updateViaCache: "none" })
    .then(() => navigator.serviceWorker.ready)
    .then(({ active }) => {
      // A kept page is no sign of who is signed in now.
      if (kept) return;
      const keep = alone && document.querySelector("[data-line]") ? location.pathname : undefined;
      active.postMessage({ member, keep });
    })
    .catch(() => { /* the certificate is not trusted, or there is no network: the queue works without */ });
}
