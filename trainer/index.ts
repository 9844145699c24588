export { type Archive, type ArchivedChannel, readArchive } from './desk/archive.ts';
