// Keeps the parts of a page current that the server pushes. The messages and
// the close codes are described in internal/live/doc.go.
//
// The element with data-live names the address:
//
//   <body data-live="/live?topic=board" data-sign-in="/sign-in">
//
// data-sign-in is where to go when the session has ended (default /sign-in); with
// data-live-stay the page stays, since nothing that it is about is pushed.
// The state of the link is told in the element with data-live-state; its words
// come from the page, so that they stay in the catalogue:
//
//   <p data-live-state role="status" data-live-on="Live"
//      data-live-off="Not live since {time}" data-live-wait="Connecting"
//      data-live-denied="Not live" data-live-zone="Europe/Berlin"></p>
//
// The element carries data-state="on", "off" or "wait" for the style sheet. The
// words change only when the state does, and a gap shorter than two seconds is
// not told at all, so that a screen reader is not kept busy. The words must be
// outside of the parts that are pushed.
//
// A pushed element replaces the one with its id, but what a person is at work
// with stays: typed text, chosen options, the focus, an open details or dialog,
// and anything marked data-live-keep. After each replaced element it fires the
// bubbling event "live:morphed", and after each message that brought something
// "live:state" at the document.

// The one place that knows where the morphing library lies. It is a plain
// script that defines the global Idiomorph.
const MORPH = new URL('../vendor/idiomorph/idiomorph.min.js', import.meta.url);

const ENDED = 4401;
const NOT_ALLOWED = 4403;

const PAUSE_FIRST = 250; // ms before the first attempt to reconnect, doubled each time
const PAUSE_LAST = 15000;
const SILENT_BEATS = 2.5; // a link silent for so many beats is dead
const GRACE = 2000; // ms, a shorter gap is not worth telling

function loadMorph() {
  if (globalThis.Idiomorph) return Promise.resolve();
  return new Promise((resolve, reject) => {
    const script = document.createElement('script');
    script.src = MORPH.href;
    script.addEventListener('load', resolve);
    script.addEventListener('error', () => reject(new Error('the morphing script did not load')));
    document.head.append(script);
  });
}

// touched tells whether a person has changed a field since it was rendered.
function touched(field) {
  if (field instanceof HTMLInputElement) {
    if (field.type === 'checkbox' || field.type === 'radio') return field.checked !== field.defaultChecked;
    return field.value !== field.defaultValue;
  }
  if (field instanceof HTMLTextAreaElement) return field.value !== field.defaultValue;
  if (field instanceof HTMLSelectElement) {
    const options = Array.from(field.options);
    if (field.multiple || options.some((o) => o.defaultSelected)) {
      return options.some((o) => o.selected !== o.defaultSelected);
    }
    return field.selectedIndex > 0; // with no default the first option is chosen
  }
  return false;
}

function beforeNodeMorphed(old, fresh) {
  if (!(old instanceof Element)) return true;
  if (inUse(old)) return false;
  if (old instanceof HTMLDetailsElement && fresh instanceof Element) fresh.toggleAttribute('open', old.open);
  return true;
}

// What somebody is at work with stays even when the newest state no longer has
// it: nobody's work vanishes under their hands.
function inUse(node) {
  return node.hasAttribute('data-live-keep') || touched(node) || (node instanceof HTMLDialogElement && node.open);
}

function beforeNodeRemoved(old) {
  if (!(old instanceof Element)) return true;
  return !(inUse(old) || Array.from(old.querySelectorAll('[data-live-keep], input, textarea, select, dialog')).some(inUse));
}

function morph(id, html) {
  const element = document.getElementById(id);
  if (!element) return; // not on this page
  globalThis.Idiomorph.morph(element, html, {
    morphStyle: 'outerHTML',
    ignoreActiveValue: true,
    restoreFocus: true,
    callbacks: { beforeNodeMorphed, beforeNodeRemoved },
  });
  document.getElementById(id)?.dispatchEvent(new CustomEvent('live:morphed', { bubbles: true }));
}

// Indicator tells a person whether what they see is live.
class Indicator {
  constructor(element) {
    this.element = element;
    this.since = null; // when the page was last known to be current
    this.timer = null;
    this.show('wait', element?.dataset.liveWait);
  }

  show(state, words) {
    if (!this.element) return;
    this.element.dataset.state = state;
    const text = words ?? '';
    if (this.element.textContent !== text) this.element.textContent = text;
  }

  // current: everything that was pushed is applied as of now.
  current() {
    this.since = new Date();
    clearTimeout(this.timer);
    this.timer = null;
    if (this.element?.dataset.state !== 'on') this.show('on', this.element?.dataset.liveOn);
  }

  // alive: the link is there and nothing has changed.
  alive() {
    if (this.timer === null && this.element?.dataset.state === 'on') this.since = new Date();
  }

  lost() {
    if (this.timer !== null || !this.element || this.element.dataset.state === 'off') return;
    this.timer = setTimeout(() => this.show('off', this.offWords()), GRACE);
  }

  denied() {
    clearTimeout(this.timer);
    if (this.element) this.show('off', this.element.dataset.liveDenied ?? this.offWords());
  }

  offWords() {
    const since = this.since ?? new Date(performance.timeOrigin); // never live: the page is as old as its load
    const zone = this.element.dataset.liveZone || undefined;
    const time = new Intl.DateTimeFormat(document.documentElement.lang || undefined, {
      hour: '2-digit', minute: '2-digit', hourCycle: 'h23', timeZone: zone,
    }).format(since);
    return (this.element.dataset.liveOff ?? '{time}').replace('{time}', time);
  }
}

class Live {
  constructor(address, signIn, indicator) {
    this.address = new URL(address, location.href);
    this.address.protocol = this.address.protocol === 'https:' ? 'wss:' : 'ws:';
    this.signIn = signIn;
    this.indicator = indicator;
    this.topics = new Set(this.address.searchParams.getAll('topic'));
    this.epoch = null;
    this.versions = new Map(); // fragment id to the version that the page shows
    this.socket = null;
    this.attempts = 0;
    this.retry = null;
    this.silence = null;
    this.stopped = false;
  }

  connect() {
    clearTimeout(this.retry);
    if (this.stopped || this.socket) return;
    const socket = new WebSocket(this.address);
    this.socket = socket;
    this.behind = new Set(this.topics); // topics without a current state on this link
    this.listenFor(15000); // no hello at all is silence too
    socket.addEventListener('message', (event) => {
      if (socket === this.socket) this.receive(JSON.parse(event.data));
    });
    socket.addEventListener('close', (event) => {
      if (socket === this.socket) this.closed(event.code);
    });
  }

  receive(message) {
    this.listenFor(this.beat ? this.beat * SILENT_BEATS : 15000);
    switch (message.type) {
      case 'hello':
        this.beat = message.beat;
        if (message.epoch !== this.epoch) {
          this.epoch = message.epoch;
          this.versions.clear();
        }
        this.listenFor(this.beat * SILENT_BEATS);
        break;
      case 'state':
        for (const { id, v, html } of message.fragments) {
          if (v <= (this.versions.get(id) ?? 0)) continue;
          morph(id, html);
          this.versions.set(id, v);
        }
        this.attempts = 0; // only a state proves that the other side works
        this.behind.delete(message.topic);
        if (this.behind.size === 0) this.indicator.current();
        document.dispatchEvent(new CustomEvent('live:state'));
        break;
      case 'stale':
        this.behind.add(message.topic);
        this.indicator.lost();
        break;
      case 'beat':
        if (this.behind.size === 0) this.indicator.alive();
        break;
    }
  }

  listenFor(ms) {
    clearTimeout(this.silence);
    this.silence = setTimeout(() => {
      const socket = this.socket;
      this.closed(0);
      socket?.close(); // its own close event may take minutes on a dead link
    }, ms);
  }

  closed(code) {
    clearTimeout(this.silence);
    this.socket = null;
    if (this.stopped) return;
    if (code === ENDED) {
      this.stopped = true;
      if (document.body.dataset.leaving) return; // on the way out already
      if (this.signIn) location.assign(this.signIn);
      return;
    }
    if (code === NOT_ALLOWED) {
      this.stopped = true;
      this.indicator.denied();
      return;
    }
    this.indicator.lost();
    const most = Math.min(PAUSE_LAST, PAUSE_FIRST * 2 ** this.attempts);
    this.attempts += 1;
    // Half fixed, half random: hundreds of screens must not come back in step.
    this.retry = setTimeout(() => this.connect(), most / 2 + Math.random() * most / 2);
  }

  // hurry is called when the browser says that the network or the page is back.
  hurry() {
    if (this.socket || this.stopped) return;
    this.attempts = 0;
    this.connect();
  }

  // pause lets a page that goes into the back-forward cache leave its socket.
  pause() {
    clearTimeout(this.retry);
    clearTimeout(this.silence);
    const socket = this.socket;
    this.socket = null;
    socket?.close();
  }
}

async function start() {
  const host = document.querySelector('[data-live]');
  if (!host?.dataset.live) return;
  const indicator = new Indicator(document.querySelector('[data-live-state]'));
  const signIn = 'liveStay' in host.dataset ? null : host.dataset.signIn || '/sign-in';
  const live = new Live(host.dataset.live, signIn, indicator);
  try {
    await loadMorph();
  } catch (error) {
    console.error(error);
    indicator.lost();
    return;
  }
  live.connect();
  addEventListener('online', () => live.hurry());
  addEventListener('offline', () => live.socket && live.listenFor(1000));
  document.addEventListener('visibilitychange', () => { if (!document.hidden) live.hurry(); });
  addEventListener('pagehide', () => live.pause());
  addEventListener('pageshow', (event) => { if (event.persisted) live.hurry(); });
}

start();
