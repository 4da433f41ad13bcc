/* SPDX-License-Identifier: Apache-2.0 */
/* One pass in pieces; libcrypto's EVP uses the processor's SHA instructions where it has them. */
#include "sha256.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <unistd.h>

#include <openssl/evp.h>

enum { CHUNK = 1 << 16 };

static int hash(int fd, EVP_MD_CTX *context, unsigned char *chunk, char hex[SHA256_HEX_SIZE])
{
	unsigned char digest[EVP_MAX_MD_SIZE];
	unsigned size = 0;
	ssize_t n;
	errno = EIO;
	if (EVP_DigestInit_ex(context, EVP_sha256(), NULL) != 1)
		return -1;
	while ((n = read(fd, chunk, CHUNK)) != 0) {
		if (n < 0 && errno == EINTR)
			continue;
		if (n < 0 || EVP_DigestUpdate(context, chunk, (size_t)n) != 1)
			return -1;
	}
	if (EVP_DigestFinal_ex(context, digest, &size) != 1 || size != (SHA256_HEX_SIZE - 1) / 2)
		return -1;
	for (unsigned i = 0; i < size; i++)
		(void)snprintf(hex + (size_t)2 * i, 3, "%02x", digest[i]);
	return 0;
}

int sha256_of_file(int fd, char hex[SHA256_HEX_SIZE])
{
	EVP_MD_CTX *context = EVP_MD_CTX_new();
	unsigned char *chunk = malloc(CHUNK);
	int rc = -1;
	if (context && chunk)
		rc = hash(fd, context, chunk, hex);
	else
		errno = ENOMEM;
	int cause = errno;
	EVP_MD_CTX_free(context);
	free(chunk);
	errno = cause;
	return rc;
}

int sha256_of_bytes(const void *bytes, size_t length, char hex[SHA256_HEX_SIZE])
{
	unsigned char digest[EVP_MAX_MD_SIZE];
	unsigned size = 0;
	if (EVP_Digest(bytes, length, digest, &size, EVP_sha256(), NULL) != 1 ||
	    size != (SHA256_HEX_SIZE - 1) / 2)
		return -1;
	for (unsigned i = 0; i < size; i++)
		(void)snprintf(hex + (size_t)2 * i, 3, "%02x", digest[i]);
	return 0;
}
