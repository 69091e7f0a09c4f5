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
  navigator.serviceWorker.register(at('sw.js'), { updateViaCache: 'none' }).catch(() => {});
}
