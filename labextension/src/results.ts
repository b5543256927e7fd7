/**
 * Draws a result of quarterturn in the output of a cell.
 *
 * The data are those of the notebook file; nothing is computed here but places on a page.
 */

import type { JupyterFrontEnd, JupyterFrontEndPlugin } from '@jupyterlab/application';
import { IRenderMimeRegistry, type IRenderMime } from '@jupyterlab/rendermime';
import { Widget } from '@lumino/widgets';

import { formula, html, type Typeset } from './elements.js';
import { figureOf, panelsOf } from './figure.js';
import { general } from './numbers.js';
import { readPayload, RESULT_MIME, type Report } from './payload.js';
import { resultTable } from './table.js';

const RANK = 20; // before text/html, which carries the same result for where there is no extension
const COUPLING_DIGITS = 8;
const NAME_LENGTH = 12; // of a record: enough to tell records of a lifetime apart

class ResultView extends Widget implements IRenderMime.IRenderer {
  constructor(private readonly latex: IRenderMime.ILatexTypesetter | null) {
    super();
    this.addClass('qt-Result');
  }

  async renderModel(model: IRenderMime.IMimeModel): Promise<void> {
    const report = readPayload(model.data[RESULT_MIME]);
    this.node.replaceChildren(
      ...(typeof report === 'string' ? complaint(report, model.data['text/plain']) : content(report, this.typeset))
    );
  }

  private readonly typeset: Typeset = async element => {
    if (this.latex === null) {
      return false;
    }
    try {
      await this.latex.typeset(element);
      return true;
    } catch {
      return false; // the plain notation stays
    }
  };
}

/** A sentence, and the plain copy of the result where the output has one. */
function complaint(sentence: string, copy: unknown): HTMLElement[] {
  const notice = html('p', 'notice', sentence);
  notice.setAttribute('role', 'note');
  return typeof copy === 'string' ? [notice, html('pre', 'copy', copy)] : [notice];
}

function content(report: Report, typeset: Typeset): HTMLElement[] {
  const parts: HTMLElement[] = [html('div', 'title', report.title)];
  if (report.latex || report.actionText) {
    parts.push(html('div', 'action', formula(report.actionText, report.latex && `\\displaystyle ${report.latex}`, typeset)));
  }
  if (report.couplings.length > 0) {
    const values = report.couplings.map(([name, value]) => {
      return html('li', '', `${name} = ${value === null ? 'not a number' : general(value, COUPLING_DIGITS)}`);
    });
    parts.push(labelled(html('ul', 'couplings', ...values), 'couplings'));
  }
  if (report.warnings.length > 0) {
    parts.push(warnings(report.warnings));
  }
  if (report.rows.length > 0) {
    parts.push(html('div', 'scroll', resultTable(report.rows, typeset)));
  }
  if (report.curves.length > 0) {
    parts.push(html('div', 'figures', ...panelsOf(report.curves).map(panel => figureOf(panel, typeset))));
  }
  parts.push(...report.omissions.map(sentence => html('p', 'note', sentence)));
  if (report.facts.length > 0 || report.actionText) {
    parts.push(method(report));
  }
  if (report.recordName) {
    const name = html('code', '', report.recordName.slice(0, NAME_LENGTH));
    name.title = report.recordName;
    parts.push(html('div', 'record', 'record ', name));
  }
  return parts;
}

function warnings(sentences: readonly string[]): HTMLElement {
  const items = sentences.map(sentence => html('li', '', html('strong', '', 'Warning: '), sentence));
  const list = labelled(html('ul', 'warnings', ...items), 'warnings');
  list.setAttribute('role', 'note');
  return list;
}

function method(report: Report): HTMLElement {
  const terms = html('dl', 'facts');
  if (report.actionText) {
    terms.append(html('dt', '', 'action'), html('dd', '', html('pre', '', report.actionText)));
  }
  for (const [name, value] of report.facts) {
    terms.append(html('dt', '', name), html('dd', '', value));
  }
  const summary = html('summary', '', 'method');
  summary.dataset['lmSuppressShortcuts'] = 'true';
  return html('details', 'method', summary, terms);
}

function labelled(element: HTMLElement, label: string): HTMLElement {
  element.setAttribute('aria-label', label);
  return element;
}

export const results: JupyterFrontEndPlugin<void> = {
  id: 'quarterturn:results',
  description: 'Draws the results of quarterturn in the outputs of a notebook.',
  autoStart: true,
  requires: [IRenderMimeRegistry],
  activate: (_app: JupyterFrontEnd, rendering: IRenderMimeRegistry) => {
    rendering.addFactory(
      {
        safe: true, // text nodes only, so an untrusted notebook may be drawn
        mimeTypes: [RESULT_MIME],
        createRenderer: options => new ResultView(options.latexTypesetter)
      },
      RANK
    );
  }
};
