/*
 * version.h - the program's version, as history rows and provenance carry it.
 */
#ifndef BASE_VERSION_H
#define BASE_VERSION_H

#define INCISURA_VERSION "0.1.0"

#endif
