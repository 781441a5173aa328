/* Stand-in for <ctype.h> (ISO C N1570 7.4). */
#ifndef STEPRING_CTYPE_H
#define STEPRING_CTYPE_H
int isalnum (int value);
int isalpha (int value);
int isascii (int value);
int isblank (int value);
int iscntrl (int value);
int isdigit (int value);
int isgraph (int value);
int islower (int value);
int isprint (int value);
int ispunct (int value);
int isspace (int value);
int isupper (int value);
int isxdigit (int value);
int tolower (int value);
int toupper (int value);
int toascii (int value);
#endif
