// The ground, light or dark: what the system asks for, or what the reader chose.
const KEY = 'epitally-ground';
const dark = () => window.matchMedia('(prefers-color-scheme: dark)');

export function chosen() {
  try {
    return localStorage.getItem(KEY);
  } catch {
    return null; // storage is switched off: the choice lasts for the page
  }
}

export function isDark() {
  const set = document.documentElement.dataset.ground;
  return set ? set === 'dark' : dark().matches;
}

export function apply(ground) {
  if (ground) document.documentElement.dataset.ground = ground;
}

export function switchGround() {
  const next = isDark() ? 'light' : 'dark';
  apply(next);
  try {
    localStorage.setItem(KEY, next);
  } catch {
    // as above
  }
  announce();
}

// announce tells maps and charts to draw themselves anew.
export function announce() {
  document.dispatchEvent(new CustomEvent('ground'));
}

export function watchSystem() {
  dark().addEventListener('change', announce);
}
