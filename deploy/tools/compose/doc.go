// Package compose checks docker-compose.yml as the containers' own tool reads it.
// It stands in the tools' module so that the reader stays out of the product.
package compose
