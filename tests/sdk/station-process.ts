// A station of the tests: puts labs `first`…`last` into its outbox one by one, sending as it goes.
// Arguments: url, token, outbox folder, first, last. Prints a line for what it has written down.
import { Fairturn, Outbox } from '../../client-sdk/src/index.ts';
import { openFileOutbox } from '../../client-sdk/src/node.ts';

const [url = '', token = '', folder = '', first = '1', last = '0'] = process.argv.slice(2);
const outbox = await Outbox.open({
  fairturn: new Fairturn({ url, token, retry: { attempts: 2, pauseMs: 1 } }),
  storage: await openFileOutbox(folder),
});
process.stdout.write(`opened with ${outbox.waiting.length} waiting\n`);
for (let number = Number(first); number <= Number(last); number += 1) {
  await outbox.add({ path: '/v1/labs', body: JSON.stringify({ name: `Lab ${number}` }) });
  process.stdout.write(`written ${number}\n`);
  await outbox.flush();
}
const { waiting, setAside } = outbox;
process.stdout.write(`done, ${waiting.length} waiting, ${setAside.length} set aside\n`);
await outbox.close();
