/**
 * The catalogue of errors a person can meet: a stable code and the fix. Each code stands once here and once in
 * config/ERRORS.md; a test holds the two against each other. To add one: a line here, a line there.
 */

export const errorCatalogue = {
  'config.invalid': 'Mend each place that is listed; `forebay check -c FILE` lists them again.',
  'config.syntax': 'Mend the YAML at that place; a text editor with YAML support shows it.',
  'config.too-large': 'Keep the station file under 64 kB and without needless nesting.',
  'config.duplicate-key': 'Keep one of the two.',
  'config.unknown-key': 'Correct the spelling or take the key out.',
  'config.missing-key': 'Add the key.',
  'config.wrong-value': 'Give a value of the kind and range that is named.',
  'config.exclusive-keys': 'Keep one of the keys that exclude each other.',
  'config.reference': 'Name something that this file defines, or define it.',
  'config.duplicate-id': 'Give each its own id.',
  'config.reserved-id': 'Choose another id: this one is a topic of the agent.',
  'config.impossible': 'Check the figure against the nameplate or the data sheet.',
  'config.unmeasurable': 'Change the settings that are named, or the sample rate of the node.',
  'config.secret': 'Move the secret into a file of its own and name that in broker.password_file.',
  'config.needs-restart': 'Restart the agent for this change, or take it back.',
  'file.unreadable': 'Check the path and that this user may read it.',
  'file.exists': 'Give another name, or --force to replace it.',
  'file.unwritable': 'Check that the folder is there, that this user may write to it and that there is room.',
  'recording.malformed':
    'Export the recording again as FLAC or as PCM WAV, 16 to 32 bit, and check that it was copied whole.',
  'command.usage': 'See `forebay help`.',
  'store.locked': 'Stop the other agent, or give this one a `storage.directory` of its own.',
  'store.unwritable':
    'Check that `storage.directory` exists, that this user may write there and that the disk is not read-only.',
  'store.full': 'Free space on the disk; what could not be written is kept in memory and tried again.',
  'store.newer':
    'Run the agent version that wrote this directory, or give this one a `storage.directory` of its own.',
  'store.broken': 'Restart the agent: it sets the broken database aside and starts a fresh one.',
  'store.busy': 'The disk cannot keep up; check the card and lower the number of points or the publish rate.',
  'store.stopped': 'Restart the agent if it was not stopped on purpose, and report the log.',
  'uplink.secret': 'Put the secret alone into the file, and let the user of the agent read it: chmod 600.',
  'uplink.url':
    'Write the broker as mqtt://, mqtts://, ws:// or wss:// with its host and port, without user or password in it.',
  'uplink.busy-port': 'Choose another `broker.embedded.port`, or stop the broker that holds this one.',
  'uplink.certificate':
    'Check `ca_file`, that the certificate is still valid and that its name is the host in `broker.url`.',
  'uplink.clock': 'Set the clock of the gateway (NTP, or a battery clock); measuring goes on meanwhile.',
  'uplink.unreachable':
    'Check that the broker runs and is the one of the station file; the embedded one runs within the agent, on a fixed port.',
  'uplink.no-answer':
    'Check that the agent runs and is connected, and that the broker lets this user write ask/ and read answer/.',
  'uplink.refused': 'Check `username`, `password_file` and what the broker allows this client.',
  'pull.no-station':
    'Check --site and --broker, and that this user may read `forebay/<site>/#` at the broker.',
  'pull.offline': 'Wait until the station is back; what it measures meanwhile is kept there.',
  'pull.refused':
    'Mend what the station names; `ask/snapshots` lists what there is, `asks` in its file what it answers.',
  'pull.budget':
    'Run the same command again after that time: what has arrived is kept. Or raise `snapshot_bytes_per_day`.',
  'pull.stalled': 'Run the same command again: what has arrived is kept.',
  'pull.damaged': 'Run the same command again; the damaged file has been removed.',
  'recording.untagged': 'Export a snapshot of a station: only its tags say what a count is.',
} as const satisfies Record<string, string>;

export type ErrorCode = keyof typeof errorCatalogue;

/** An error with a code of the catalogue; `message` names what and where, `fix` what to do about it. */
export class ForebayError extends Error {
  readonly code: ErrorCode;
  readonly fix: string;

  constructor(code: ErrorCode, message: string, options?: ErrorOptions) {
    super(message, options);
    this.name = 'ForebayError';
    this.code = code;
    this.fix = errorCatalogue[code];
  }
}
