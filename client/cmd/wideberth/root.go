package main

import (
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"os"
	"time"

	"github.com/spf13/cobra"
	"google.golang.org/grpc/credentials"

	"example.com/wideberth/client"
)

const (
	defaultServer  = "127.0.0.1:7443"
	serverVariable = "WIDEBERTH_SERVER"
	authorVariable = "WIDEBERTH_AUTHOR"
	defaultTimeout = 30 * time.Second
	// callTries is how often a call is sent before the tool gives up: a person is
	// waiting, and can ask again.
	callTries = 3
)

// app is one run of the tool.
type app struct {
	getenv         func(string) string
	stdout, stderr writer
	started        bool // a command began to run

	server    string
	output    string
	timeout   time.Duration
	plaintext bool
	ca        string
}

func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "wideberth",
		Short: "Show floors, push patches and ask for routes",
		Long: "wideberth is the operator's tool of a wideberth service.\n\n" +
			"Data goes to stdout, everything else to stderr. Exit codes: 0 done, 1 failed,\n" +
			"2 wrong command line, 3 rejected by validation, 4 version conflict, 5 server\n" +
			"unreachable or too late, 6 refused: no route (reach: not to every place;\n" +
			"compare-roadmaps: over none).",
		Args:          cobra.NoArgs,
		SilenceErrors: true,
		SilenceUsage:  true,
		RunE: func(*cobra.Command, []string) error {
			return usagef("no command")
		},
		PersistentPreRunE: func(cmd *cobra.Command, _ []string) error {
			if err := cmd.ValidateFlagGroups(); err != nil {
				return usageError{err}
			}
			if a.output != "table" && a.output != "json" {
				return usagef("--output is %q, want table or json", a.output)
			}
			if a.timeout <= 0 {
				return usagef("--timeout is %v, want above 0", a.timeout)
			}
			a.started = true
			return nil
		},
	}
	server := a.getenv(serverVariable)
	if server == "" {
		server = defaultServer
	}
	f := root.PersistentFlags()
	f.StringVar(&a.server, "server", server, "the service's `host:port`; default from "+serverVariable)
	f.StringVar(&a.output, "output", "table", "how to print: table or json")
	f.DurationVar(&a.timeout, "timeout", defaultTimeout, "how long one call may take")
	f.BoolVar(&a.plaintext, "plaintext", false, "speak without TLS to a server that is not on this machine")
	f.StringVar(&a.ca, "ca", "", "speak TLS and trust the certificates in this PEM `file`")
	root.MarkFlagsMutuallyExclusive("plaintext", "ca")
	root.AddCommand(a.floors(), a.push(), a.versions(), a.compare(), a.restore(), a.watch(), a.plan(), a.reach(), a.roadmap(), a.compareRoadmaps(), a.grown(), a.trial(), a.version())
	return root
}

// authorFlag adds --author, which defaults to the variable's value.
func (a *app) authorFlag(cmd *cobra.Command, author *string, usage string) {
	cmd.Flags().StringVar(author, "author", a.getenv(authorVariable), usage+"; default from "+authorVariable)
}

// connect gives a client for the server. The caller closes it.
func (a *app) connect() (*client.Client, error) {
	return a.connectTo(a.server)
}

func (a *app) connectTo(addr string) (*client.Client, error) {
	opts := []client.Option{
		client.WithTimeouts(client.Timeouts{Read: a.timeout, Plan: a.timeout, Push: a.timeout, Content: a.timeout}),
		client.WithMaxTries(callTries),
	}
	if a.plaintext {
		opts = append(opts, client.WithPlaintext())
	}
	if a.ca != "" {
		pem, err := readFile(a.ca, maxCertificateBytes)
		if err != nil {
			return nil, err
		}
		pool := x509.NewCertPool()
		if !pool.AppendCertsFromPEM(pem) {
			return nil, fmt.Errorf("%s: no certificate in it", a.ca)
		}
		opts = append(opts, client.WithTransportCredentials(credentials.NewTLS(&tls.Config{RootCAs: pool, MinVersion: tls.VersionTLS12})))
	}
	c, err := client.Dial(addr, opts...)
	if err != nil {
		return nil, usageError{err}
	}
	return c, nil
}

// with runs do with a client.
func (a *app) with(do func(*client.Client) error) (err error) {
	c, err := a.connect()
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, c.Close()) }()
	return do(c)
}

// Limits of the files read here; patchfile, layout and trial have their own.
const (
	maxCertificateBytes = 1 << 20
	maxBodyBytes        = 64 << 10
)

// readFile reads a file of at most limit bytes.
func readFile(path string, limit int64) (data []byte, err error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, err
	}
	defer func() { _ = f.Close() }() // it was only read
	if data, err = readAll(f, limit); err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return data, nil
}
