// Package loadtest measures the whole program under load: through the gate, durable and judged. It is asked for by a flag.
package loadtest
