/**
 * Colours a cell as an action for as long as its first line says `%%action`.
 *
 * Each editor holds the language in a compartment of its own. The transaction that changes the first line carries the
 * switch with it, so there is no moment with the wrong colours, and Python's lie below, untouched, until the magic goes.
 */

import { LanguageSupport, StreamLanguage, syntaxHighlighting } from '@codemirror/language';
import { Compartment, EditorState, Prec, type Extension } from '@codemirror/state';
import type { JupyterFrontEnd, JupyterFrontEndPlugin } from '@jupyterlab/application';
import { EditorExtensionRegistry, IEditorExtensionRegistry } from '@jupyterlab/codemirror';
import { Tag, tagHighlighter, tags } from '@lezer/highlight';

import { atLineStart, isAction, nextToken, startState, type Kind, type State } from './notation.js';

const field = Tag.define(tags.variableName);
const expectation = Tag.define(tags.bracket);
const derivative = Tag.define(tags.string);

/** The theme's own colours: a kind of token takes the colour of the tag that it is here, or stands under. */
const tagOfKind: Record<Kind, Tag> = {
  magic: tags.meta,
  name: tags.definition(tags.variableName),
  option: tags.attributeName,
  keyword: tags.keyword,
  field: tags.definition(field),
  function: tags.standard(tags.variableName),
  symbol: tags.variableName,
  setting: tags.atom,
  number: tags.number,
  derivative,
  operator: tags.operator,
  expectation,
  bracket: tags.bracket,
  punctuation: tags.punctuation,
  comment: tags.lineComment
};

/** What the theme cannot know is left to style/base.css. */
const ownClasses = tagHighlighter([
  { tag: field, class: 'qt-Action-field' },
  { tag: expectation, class: 'qt-Action-expectation' },
  { tag: derivative, class: 'qt-Action-derivative' }
]);

/** The scanner's state in a box, since the editor wants one that `token` can refill. */
interface Box {
  state: State;
}

const actionLanguage = StreamLanguage.define<Box>({
  name: 'quarterturn action',
  startState: () => ({ state: startState() }),
  copyState: box => ({ ...box }),
  token: (stream, box) => {
    if (stream.sol()) {
      box.state = atLineStart(stream.string, box.state);
    }
    const { end, kind, state } = nextToken(stream.string, stream.pos, box.state);
    stream.pos = end;
    box.state = state;
    return kind;
  },
  tokenTable: tagOfKind,
  languageData: { commentTokens: { line: '#' } }
});

const actionColours: Extension = Prec.highest([
  new LanguageSupport(actionLanguage),
  syntaxHighlighting(ownClasses)
]);

/** The extension of one editor, whose text is `text` when it opens. */
function switchable(text: string): Extension {
  const compartment = new Compartment();
  const content = (on: boolean): Extension => (on ? actionColours : []);
  const follow = EditorState.transactionExtender.of(transaction => {
    if (!transaction.docChanged) {
      return null;
    }
    const was = isAction(transaction.startState.doc.line(1).text);
    const is = isAction(transaction.newDoc.line(1).text);
    return was === is ? null : { effects: compartment.reconfigure(content(is)) };
  });
  return [compartment.of(content(isAction(text))), follow];
}

export const language: JupyterFrontEndPlugin<void> = {
  id: 'quarterturn:language',
  description: 'Colours a cell that begins with %%action as an action.',
  autoStart: true,
  requires: [IEditorExtensionRegistry],
  activate: (_app: JupyterFrontEnd, editors: IEditorExtensionRegistry) => {
    editors.addExtension({
      name: 'quarterturn:language',
      factory: ({ model }) =>
        EditorExtensionRegistry.createImmutableExtension(switchable(model.sharedModel.getSource()))
    });
  }
};
