/* Cells of the tables that people read at the shell. */
#ifndef WANE_CLI_TABLE_H
#define WANE_CLI_TABLE_H

#include "wane/text.h"

/* Appends blanks until what stands from `begin` on is `width` characters wide (not bytes): one
 * blank at least. */
void table_pad(struct text *text, size_t begin, size_t width);

/* A text, padded. Control characters, which could steer a terminal, become '?'. */
void table_text(struct text *text, const char *string, size_t width);

/* Ends a line: blanks at its end go. */
void table_end_line(struct text *text);

/* value ± u, u to two digits and the value to the same place; "-" for a value that is not known or
 * smaller than its u. Padded. */
void table_value(struct text *text, double value, double u, size_t width);

#endif
