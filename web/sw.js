// Keeps the page for use without a network. The version and the list are filled in by the build.
const VERSION = "EVENFALL_VERSION";
const FILES = ["EVENFALL_FILES"];
const NAME = 'evenfall-page-' + VERSION;

self.addEventListener('install', (event) => {
  event.waitUntil(
    caches.open(NAME)
      .then((cache) => cache.addAll(FILES.map((file) => new Request(file, { cache: 'reload' })))),
  );
});
// A new version waits until the page asks for it: open tabs keep the files they started with.
self.addEventListener('message', (event) => {
  if (event.data === 'take over') self.skipWaiting();
});
self.addEventListener('activate', (event) => {
  event.waitUntil(
    caches.keys()
      .then((names) => Promise.all(
        names.filter((name) => name.startsWith('evenfall-page-') && name !== NAME).map((name) => caches.delete(name)),
      ))
      .then(() => self.clients.claim()),
  );
});
self.addEventListener('fetch', (event) => {
  const request = event.request;
  if (request.method !== 'GET' || new URL(request.url).origin !== location.origin) return;
  const wanted = request.mode === 'navigate' ? './' : request;
  event.respondWith(
    caches.open(NAME).then((cache) => cache.match(wanted, { ignoreSearch: true })).then((hit) => hit || fetch(request)),
  );
});
