// Package install makes sure that the PostgreSQL server programs are on the machine, so that a fresh Debian needs
// nothing but Go to run Limitary.
//
// [Ensure] looks for them first and does nothing where they are there. Else, for root on a machine with apt-get, it
// installs Debian's package. That package, left to itself, also makes a cluster named main and starts it on port 5432,
// which nobody asked for here; so a setting that forbids it is laid down before the installation and taken away after
// it, and the machine is left as its administrator knows it. Debian reads the setting on the first installation only.
//
// Anyone else, and everyone on another system, gets an [Error] that says why and lists the commands to run.
package install
