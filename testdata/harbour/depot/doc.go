// Package depot holds what the harbour shares out: memory, files, tickets, pooled
// objects and permission to send.
package depot
