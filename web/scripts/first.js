// Runs before the first paint, so that a chosen ground does not flash.
import { apply, chosen } from './ground.js';

apply(chosen());
document.documentElement.classList.add('scripted');
