/* The commands of `wane`, one file each, and what they share. argv[0] is the command's own word.
 * Each returns the exit status of contract.md: 0 done, 1 could not be done, 2 wrong usage. */
#ifndef WANE_CLI_COMMANDS_H
#define WANE_CLI_COMMANDS_H

int cmd_read(int argc, char **argv);
int cmd_simulate(int argc, char **argv);
int cmd_inputs(int argc, char **argv);
int cmd_log(int argc, char **argv);
int cmd_invite(int argc, char **argv);
int cmd_export(int argc, char **argv);
int cmd_series(int argc, char **argv);
int cmd_report(int argc, char **argv);

#endif
