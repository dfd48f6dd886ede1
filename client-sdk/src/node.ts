export { FolderLockedError } from '../../server/platform/folder-lock.ts';
export { OutboxDamagedError, openFileOutbox } from './file-outbox.ts';
export { openFileStore } from './file-store.ts';
