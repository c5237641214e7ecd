import type { z } from 'zod';

/** What a text of a certain form should have been, by the key that holds it. */
const forms: Readonly<Record<string, string>> = {
  raised: 'is not an id of an alarm',
  cancel: 'is not an id of an ask',
  since: 'is neither an id nor a time such as 2026-03-02T10:15:30Z',
  from: 'is not a time such as 2026-03-02T10:15:30Z',
  to: 'is not a time such as 2026-03-02T10:15:30Z',
};

const kinds: Readonly<Record<string, string>> = {
  string: 'text',
  number: 'a number',
  int: 'a whole number',
  array: 'a list',
};

/** One sentence, for whoever sent the ask, on what its check found wrong. @param body the ask as it came. */
export function askTrouble(issue: z.core.$ZodIssue, body: unknown): string {
  // What a schema itself says in words.
  if (issue.code === 'custom') return issue.message;
  const name = issue.path.reduce<string>(
    (text, key) =>
      typeof key === 'number' ? `${text}[${key}]` : text === '' ? String(key) : `${text}.${String(key)}`,
    '',
  );
  if (valueAt(body, issue.path) === undefined) return `${name} is missing`;
  switch (issue.code) {
    case 'invalid_type':
      return `${name} must be ${kinds[issue.expected] ?? issue.expected}`;
    case 'invalid_value':
      return `${name} must be one of ${issue.values.map(String).join(', ')}`;
    case 'too_small':
      if (issue.origin === 'string')
        return issue.minimum === 1
          ? `${name} is empty`
          : `${name} must have ${issue.minimum} characters or more`;
      return `${name} must be a number ${issue.inclusive === false ? 'above' : 'not below'} ${issue.minimum}`;
    case 'too_big':
      if (issue.origin === 'string') return `${name} may have ${issue.maximum} characters at most`;
      if (issue.origin === 'array') return `${name} may have ${issue.maximum} entries at most`;
      return `${name} may be ${issue.maximum} at most`;
    default:
      return `${name} ${forms[String(issue.path[0])] ?? 'has not the form that is wanted'}`;
  }
}

function valueAt(body: unknown, path: readonly PropertyKey[]): unknown {
  return path.reduce<unknown>(
    (value, key) => (value as Record<PropertyKey, unknown> | undefined)?.[key],
    body,
  );
}
