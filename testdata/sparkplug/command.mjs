// Writes the payload of a host's command as a library of others encodes it.
//   node command.mjs FOLDER_OF_NODE_MODULES 'Node Control/Rebirth' > payload
import { createRequire } from 'node:module';
const sparkplug = createRequire(process.argv[2] + '/')('sparkplug-payload').get('spBv1.0');
process.stdout.write(sparkplug.encodePayload({ timestamp: Date.now(), metrics: [{ name: process.argv[3], type: 'Boolean', value: true, timestamp: Date.now() }] }));
