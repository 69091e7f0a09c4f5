// Starts the page: the names of the hashed files stand on this script's own element.
const here = document.querySelector('script[data-glue]');
const at = (name) => new URL(name, document.baseURI).href;
import(at(here.dataset.glue))
  .then((glue) => glue.default({ module_or_path: at(here.dataset.wasm) }))
  .catch((error) => {
    const note = document.createElement('p');
    note.setAttribute('role', 'alert');
    note.textContent = 'Evenfall did not start: ' + error + '. Saved designs are untouched; reload to try again.';
    document.body.prepend(note);
  });
if ('serviceWorker' in navigator && location.protocol.startsWith('http')) {
  // The very first worker takes charge of a page that is already the newest.
  let first = !navigator.serviceWorker.controller;
  const offer = (worker) => {
    const bar = document.createElement('p');
    bar.className = 'update';
    bar.setAttribute('role', 'status');
    bar.textContent = 'A new version of the page is here. ';
    const button = document.createElement('button');
    button.textContent = 'Reload with it';
    button.addEventListener('click', () => worker.postMessage('take over'));
    bar.append(button);
    document.body.prepend(bar);
  };
  navigator.serviceWorker.register(at('sw.js'), { updateViaCache: 'none' }).then((registration) => {
    if (registration.waiting) offer(registration.waiting);
    registration.addEventListener('updatefound', () => {
      const worker = registration.installing;
      worker.addEventListener('statechange', () => {
        if (worker.state === 'installed' && navigator.serviceWorker.controller) offer(worker);
      });
    });
  }).catch(() => {});
  // The design stands in the address, so a reload loses nothing.
  navigator.serviceWorker.addEventListener('controllerchange', () => {
    if (first) first = false;
    else location.reload();
  });
}
