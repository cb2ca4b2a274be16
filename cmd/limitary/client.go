package main

import (
	"context"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"net"
	"os"
	"strings"

	"google.golang.org/grpc"
	"google.golang.org/grpc/credentials"
	"google.golang.org/grpc/credentials/insecure"
	"google.golang.org/grpc/status"

	"limitary/internal/server"
)

// clientFlags say which service a command asks, and as whom.
type clientFlags struct {
	server, tokenFile, ca string
	plaintext, json       bool
}

// envToken is the variable that holds the bearer token; a flag for it would show in lists of processes.
const envToken = "LIMITARY_TOKEN"

func (c *clientFlags) add(f *flagSet) {
	f.StringVar(&c.server, "server", server.DefaultGRPCAddress, "`ADDR` of the service's gRPC listener")
	f.StringVar(&c.tokenFile, "token-file", "", "`FILE` with the bearer token (default: the variable "+envToken+")")
	f.StringVar(&c.ca, "tls-ca", "", "`FILE` with the certificates to trust, PEM (default: the system's)")
	f.BoolVar(&c.plaintext, "plaintext", false, "no TLS though the service is on another machine")
	f.BoolVar(&c.json, "json", false, "write the API's own JSON")
}

// clientBytesMax is the largest answer taken.
const clientBytesMax = 256 << 20

// dial connects to the service. On this machine it speaks without TLS unless certificates to trust are given.
func (c *clientFlags) dial(env *environment) (*grpc.ClientConn, error) {
	token, err := c.token(env)
	if err != nil {
		return nil, err
	}
	secure, err := c.transport()
	if err != nil {
		return nil, err
	}
	return grpc.NewClient(c.server, grpc.WithTransportCredentials(secure), grpc.WithPerRPCCredentials(bearerToken(token)),
		grpc.WithDefaultCallOptions(grpc.MaxCallRecvMsgSize(clientBytesMax)), grpc.WithUserAgent("limitary-cli"))
}

func (c *clientFlags) token(env *environment) (string, error) {
	if c.tokenFile != "" {
		b, err := os.ReadFile(c.tokenFile)
		if err != nil {
			return "", err
		}
		return strings.TrimSpace(string(b)), nil
	}
	if t := strings.TrimSpace(env.Getenv(envToken)); t != "" {
		return t, nil
	}
	return "", fmt.Errorf("no key: set %s, or give --token-file", envToken)
}

func (c *clientFlags) transport() (credentials.TransportCredentials, error) {
	host, _, err := net.SplitHostPort(c.server)
	if err != nil {
		return nil, fmt.Errorf("--server %q: want HOST:PORT", c.server)
	}
	ip := net.ParseIP(host)
	local := host == "localhost" || ip != nil && ip.IsLoopback()
	if c.ca == "" && (local || c.plaintext) {
		return insecure.NewCredentials(), nil
	}
	if c.plaintext {
		return nil, errors.New("--plaintext and --tls-ca exclude each other")
	}
	config := &tls.Config{MinVersion: tls.VersionTLS12}
	if c.ca != "" {
		pem, err := os.ReadFile(c.ca)
		if err != nil {
			return nil, err
		}
		config.RootCAs = x509.NewCertPool()
		if !config.RootCAs.AppendCertsFromPEM(pem) {
			return nil, fmt.Errorf("--tls-ca %s: holds no certificate", c.ca)
		}
	}
	return credentials.NewTLS(config), nil
}

// bearerToken sends the token with every call.
type bearerToken string

// GetRequestMetadata implements credentials.PerRPCCredentials.
func (t bearerToken) GetRequestMetadata(context.Context, ...string) (map[string]string, error) {
	return map[string]string{"authorization": "Bearer " + string(t)}, nil
}

// RequireTransportSecurity implements credentials.PerRPCCredentials; dial has seen to it.
func (bearerToken) RequireTransportSecurity() bool { return false }

// callFailed prints what the service says and gives the exit code.
func callFailed(env *environment, err error) int {
	s, ok := status.FromError(err)
	if !ok {
		return fail(env, "%v", err)
	}
	return fail(env, "%s (%s)", s.Message(), s.Code())
}

// requestIDFlag adds the id that makes a write safe to repeat; without one each call is a new request.
func requestIDFlag(f *flagSet) func() string {
	id := f.String("request-id", "", "`ID` under which repeating this very call is safe (default: a new one)")
	return func() string {
		if *id == "" {
			return rand.Text()
		}
		return *id
	}
}
