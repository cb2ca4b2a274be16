package server

import (
	"context"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/pem"
	"math/big"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"testing"
	"time"

	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"
	"google.golang.org/grpc/credentials"
	"google.golang.org/grpc/status"

	pb "limitary/api/limitary/v1"
)

// certificate makes a self-signed certificate for this machine.
func certificate(t *testing.T) (certFile, keyFile string, pool *x509.CertPool) {
	t.Helper()
	key, err := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	if err != nil {
		t.Fatal(err)
	}
	template := &x509.Certificate{
		SerialNumber: big.NewInt(1), Subject: pkix.Name{CommonName: "limitary test"}, IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)},
		NotBefore: time.Now().Add(-time.Hour), NotAfter: time.Now().Add(time.Hour), IsCA: true, BasicConstraintsValid: true,
	}
	der, err := x509.CreateCertificate(rand.Reader, template, template, &key.PublicKey, key)
	if err != nil {
		t.Fatal(err)
	}
	keyDER, err := x509.MarshalPKCS8PrivateKey(key)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	write := func(name, kind string, der []byte) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, pem.EncodeToMemory(&pem.Block{Type: kind, Bytes: der}), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	pool = x509.NewCertPool()
	cert, err := x509.ParseCertificate(der)
	if err != nil {
		t.Fatal(err)
	}
	pool.AddCert(cert)
	return write("cert.pem", "CERTIFICATE", der), write("key.pem", "PRIVATE KEY", keyDER), pool
}

func TestBothListenersSpeakTLS(t *testing.T) {
	cert, key, pool := certificate(t)
	h := start(t, Options{TLSCert: cert, TLSKey: key}, fine, fine)
	trusting := &tls.Config{RootCAs: pool, MinVersion: tls.VersionTLS12}
	conn, err := grpc.NewClient(h.GRPCAddress(), grpc.WithTransportCredentials(credentials.NewTLS(trusting)))
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	if _, err := pb.NewRuleServiceClient(conn).ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{}); err != nil {
		t.Error("grpc:", err)
	}
	client := http.Client{Transport: &http.Transport{TLSClientConfig: trusting, DisableKeepAlives: true}}
	resp, err := client.Get("https://" + h.HTTPAddress() + "/healthz")
	if err != nil {
		t.Fatal("https:", err)
	}
	_ = resp.Body.Close()
	if resp.StatusCode != http.StatusOK {
		t.Error("https: got", resp.StatusCode)
	}
	if _, err := h.client.ListRules(h.authorized(context.Background()), &pb.ListRulesRequest{}); status.Code(err) != codes.Unavailable {
		t.Errorf("in clear: got %v, want no answer", err)
	}
	if resp, err := http.Get("http://" + h.HTTPAddress() + "/healthz"); err == nil {
		_ = resp.Body.Close()
		if resp.StatusCode == http.StatusOK {
			t.Error("in clear over HTTP: answered")
		}
	}
}

func TestAMessageThatIsTooLargeIsRefused(t *testing.T) {
	h := start(t, Options{BodyBytesMax: 1 << 10}, fine, fine)
	big := &pb.EvaluateBatchRequest{Evaluations: []*pb.Evaluation{{Data: &pb.Evaluation_Series{Series: &pb.Series{Values: make([]float64, 200)}}}}}
	err := h.conn.Invoke(h.authorized(context.Background()), pb.RuleService_ListRules_FullMethodName, big, &pb.ListRulesResponse{})
	if status.Code(err) != codes.ResourceExhausted {
		t.Errorf("got %v", err)
	}
}
