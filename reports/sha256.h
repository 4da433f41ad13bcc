/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SHA256_H
#define DRIVETRIAL_SHA256_H
/*
 * SHA-256 of files, by libcrypto. A house of its own, since OpenSSL's headers
 * and err.h both claim the name ERR_STATE. Private to this folder.
 */
#include <stddef.h>

enum { SHA256_HEX_SIZE = 65 };

/*
 * The hash of the rest of an open file, in lower-case hexadecimal. -1 with
 * errno where it cannot be read or memory ran out.
 */
int sha256_of_file(int fd, char hex[SHA256_HEX_SIZE]);

int sha256_of_bytes(const void *bytes, size_t length, char hex[SHA256_HEX_SIZE]);

#endif
