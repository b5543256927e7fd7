import { language } from './language.js';
import { results } from './results.js';

export default [language, results];
