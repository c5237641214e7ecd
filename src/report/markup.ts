/** HTML from templates whose values are escaped: a tag of a recording may hold anything. */

/** Text that is HTML already. */
export class Markup {
  readonly text: string;

  constructor(text: string) {
    this.text = text;
  }
}

type Value = Markup | string | number | null | undefined | false | readonly Value[];

/** A template whose values are escaped, but for other templates; lists are joined, null and false are nothing. */
export function html(strings: TemplateStringsArray, ...values: readonly Value[]): Markup {
  let text = strings[0]!;
  values.forEach((value, k) => {
    text += textOf(value) + strings[k + 1]!;
  });
  return new Markup(text);
}

function textOf(value: Value): string {
  if (value === null || value === undefined || value === false) return '';
  if (value instanceof Markup) return value.text;
  if (typeof value === 'string') return escaped(value);
  if (typeof value === 'number') return escaped(String(value));
  return value.map(textOf).join('');
}

const NAMES: Readonly<Record<string, string>> = {
  '&': '&amp;',
  '<': '&lt;',
  '>': '&gt;',
  '"': '&quot;',
  "'": '&#39;',
};

function escaped(text: string): string {
  return text.replace(/[&<>"']/g, (character) => NAMES[character]!);
}

/** JSON that may stand within a script element. */
export function scriptJson(value: unknown): string {
  return JSON.stringify(value).replace(/</g, '\\u003c');
}
