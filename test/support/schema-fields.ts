/** Lists the fields of a schema as dotted paths, with what may stand in their place, to hold tables against. */
import type { z } from 'zod';
import { tensorSchema } from '../../protocol/bundle-schema.ts';

/** One field: lists of maps as `name[]`, free keys as `name.*`. */
export interface SchemaField {
  readonly path: string;
  readonly isNullable: boolean;
  readonly isOptional: boolean;
}

interface Definition {
  readonly type: string;
  readonly innerType?: z.ZodType;
  readonly element?: z.ZodType;
  readonly shape?: Record<string, z.ZodType>;
  readonly out?: z.ZodType;
}

const definitionOf = (schema: z.ZodType): Definition => schema.def as unknown as Definition;

/** Fields of an object schema, nested maps and lists of maps included; tensors and everything else count as one field. */
export const schemaFields = (schema: z.ZodType, path = ''): readonly SchemaField[] => {
  let inner = schema;
  let isNullable = false;
  let isOptional = false;
  for (let def = definitionOf(inner); def.type === 'optional' || def.type === 'nullable'; def = definitionOf(inner)) {
    if (def.type === 'nullable') isNullable = true;
    else isOptional = true;
    inner = def.innerType!;
  }
  const def = definitionOf(inner);
  if (def.type === 'object' && inner !== tensorSchema) {
    const own = path === '' ? [] : [{ path, isNullable, isOptional }];
    const nested = Object.entries(def.shape!).flatMap(([key, field]) =>
      schemaFields(field, path === '' ? key : `${path}.${key}`),
    );
    // A map that may be missing is a field itself; one that is always there is only its fields.
    return isNullable || isOptional ? [...own, ...nested] : nested;
  }
  if (def.type === 'array' && definitionOf(def.element!).type === 'object') {
    const entries = schemaFields(def.element!, `${path}[]`);
    return [{ path, isNullable, isOptional }, ...entries];
  }
  return [{ path, isNullable, isOptional }];
};
