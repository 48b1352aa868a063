// @ts-check
/* Mounts the panels, starts the stream, and hands keys on. Nothing else. */

import { loadLanguage, t } from './lang.js';
import { Store } from './store.js';
import { startStream } from './stream.js';
import { startKeys } from './keyboard.js';
import * as strip from './panels/strip.js';
import * as level from './panels/level.js';
import * as reading from './panels/reading.js';
import * as modes from './panels/modes.js';
import * as verdict from './panels/verdict.js';
import * as bigWedge from './panels/big-wedge.js';
import * as row from './panels/row.js';
import * as plots from './panels/plots.js';
import * as series from './panels/series.js';
import * as log from './panels/log.js';
import * as sheet from './panels/sheet.js';
import * as voice from './panels/voice.js';
import * as drop from './panels/drop.js';

const store = new Store();
await loadLanguage(store.prefs.language);
document.title = t('title');

store.watch(['prefs'], () => {
  const root = document.documentElement;
  if (store.prefs.theme === 'auto') root.removeAttribute('data-theme');
  else root.setAttribute('data-theme', store.prefs.theme);
});

/** The address says what is shown: #wide, #strike=ID. */
function followAddress() {
  const isWide = location.hash === '#wide' || (!location.hash && store.prefs.wide);
  store.isWide = isWide;
  document.body.classList.toggle('wide', isWide);
  const link = /^#strike=(\d+)$/.exec(location.hash);
  if (link) store.announce('open-strike', Number(link[1]));
  store.touch('selection', 'row', 'strikes', 'forming');
}

const panels = {
  strip, level, reading, modes, verdict, 'big-wedge': bigWedge, row, plots, series, log, sheet, say: voice, drop,
};
for (const [id, panel] of Object.entries(panels)) {
  const element = document.getElementById(id);
  if (element) panel.mount(element, store);
}
window.addEventListener('hashchange', followAddress);
followAddress();
startKeys(store);
startStream(store);
setInterval(() => store.touch('clock'), 1000);
