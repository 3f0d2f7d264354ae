// Everything of a page but its charts.
import { isDark, switchGround, watchSystem } from './ground.js';
import { startMap } from './map.js';
import { startChooser } from './chooser.js';
import { drawSwatches } from './swatch.js';
import { startEditor } from './editor.js';
import { startUpload } from './upload.js';

function startGround() {
  const button = document.getElementById('ground');
  if (!button) return;
  const name = () => {
    button.textContent = isDark() ? 'Light ground' : 'Dark ground';
  };
  button.hidden = false;
  button.addEventListener('click', switchGround);
  document.addEventListener('ground', name);
  watchSystem();
  name();
}

// Small maps are pictures of the server, one for each ground.
function setSmallMaps() {
  const key = isDark() ? 'dark' : 'light';
  for (const img of document.querySelectorAll('img[data-light]')) {
    if (img.getAttribute('src') !== img.dataset[key]) img.src = img.dataset[key];
  }
}

startGround();
setSmallMaps();
drawSwatches();
const map = startMap();
startChooser(map);
startEditor();
startUpload();
document.addEventListener('ground', () => {
  setSmallMaps();
  drawSwatches();
});
document.addEventListener('parts', () => drawSwatches());
window.addEventListener('beforeprint', () => drawSwatches(true));
window.addEventListener('afterprint', () => drawSwatches());
