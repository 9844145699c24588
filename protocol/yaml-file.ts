/**
 * A YAML file written by people: read to plain values, and every refusal with the line and column it stands at.
 */
import type { Document } from 'yaml';
import { ProtocolError, type ProtocolErrorCode } from './errors.ts';
import { type Fault, formatFault } from './issue.ts';
import { formatPath } from './path.ts';
import { yamlLibrary } from './yaml-library.ts';

/** What a kind of file is called in refusals. */
export interface YamlKind {
  readonly code: ProtocolErrorCode;
  /** "a site file" */
  readonly called: string;
  /** What it must hold, after "with the keys". */
  readonly keys: string;
  readonly maxBytes: number;
}

/** A file read, not yet checked against a schema. */
export interface YamlFile {
  readonly plain: unknown;
  /** The refusal of a file for its first fault; the others are counted. */
  refusal(faults: readonly Fault[]): ProtocolError;
  /** Line of the value a path names, from 1. */
  lineOf(path: readonly PropertyKey[]): number;
}

/** What the YAML reader's own codes mean to a person; its message where there is no better one. */
const yamlText = (error: { code: string; message: string }): string => {
  if (error.code === 'DUPLICATE_KEY') return 'this key appears twice in the same map; keep one';
  if (error.code === 'TAB_AS_INDENT') return 'expected spaces for indentation, got a tab';
  if (error.code === 'MULTIPLE_DOCS') return 'expected one YAML document, got several; remove the "---" line';
  if (error.message.includes('call stack')) return 'expected a few levels of nesting, got too many to read';
  return `not valid YAML: ${error.message}`;
};

/** Offset of the value a path names, of its key for an unknown one, or of the nearest map around a missing one. */
const offsetOf = (document: Document.Parsed, fault: Pick<Fault, 'path' | 'isUnknownKey'>): number => {
  const { isAlias, isMap, isNode, isScalar, isSeq } = yamlLibrary();
  let node: unknown = document.contents;
  let offset = document.contents?.range[0] ?? 0;
  for (const [depth, step] of fault.path.entries()) {
    if (isAlias(node)) node = node.resolve(document);
    if (isMap(node)) {
      const pair = node.items.find((item) => isScalar(item.key) && String(item.key.value) === String(step));
      if (pair === undefined || !isScalar(pair.key)) return offset;
      const isKey = (fault.isUnknownKey && depth === fault.path.length - 1) || !isNode(pair.value);
      offset = (isKey ? pair.key.range?.[0] : (pair.value as { range?: number[] }).range?.[0]) ?? offset;
      node = pair.value;
    } else if (isSeq(node)) {
      node = node.items[Number(step)];
      if (!isNode(node)) return offset;
      offset = node.range?.[0] ?? offset;
    } else return offset;
  }
  return offset;
};

/**
 * Reads a YAML file.
 *
 * throws  ProtocolError with the kind's code: "file:line:col: …" where it is too large, empty or no YAML
 */
export const readYamlFile = (text: string, fileName: string, kind: YamlKind): YamlFile => {
  const { code, called, keys, maxBytes } = kind;
  const bytes = Buffer.byteLength(text);
  if (bytes > maxBytes) {
    throw new ProtocolError(
      code,
      `${fileName}: expected ${called} of at most ${maxBytes} bytes, got ${bytes}; check that it is the right file`,
      { details: { fileName } },
    );
  }
  const { LineCounter, parseDocument } = yamlLibrary();
  const lines = new LineCounter();
  const faultAt = (offset: number, words: string, path = ''): ProtocolError => {
    const { line, col } = lines.linePos(offset);
    return new ProtocolError(code, `${fileName}:${line}:${col}: ${words}`, { details: { fileName, line, col, path } });
  };
  const document = parseDocument(text, { lineCounter: lines, prettyErrors: false, schema: 'core', version: '1.2' });
  const problem = document.errors[0] ?? document.warnings[0];
  if (problem !== undefined) throw faultAt(problem.pos[0], yamlText(problem));
  if (document.contents === null) throw faultAt(0, `expected ${called} with the keys ${keys}, got an empty file`);
  let plain: unknown;
  try {
    plain = document.toJS();
  } catch (error) {
    throw faultAt(0, `not usable YAML: ${(error as Error).message}`);
  }
  return {
    plain,
    refusal: (faults) => {
      const first = faults[0]!;
      const more = faults.length > 1 ? ` (and ${faults.length - 1} more)` : '';
      return faultAt(offsetOf(document, first), `${formatFault(first)}${more}`, formatPath(first.path));
    },
    lineOf: (path) => lines.linePos(offsetOf(document, { path, isUnknownKey: false })).line,
  };
};
