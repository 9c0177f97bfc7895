package record

import (
	"bytes"
	"context"
	"encoding/csv"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sort"
	"strconv"
	"time"
)

// YieldLog is a lot's yield.csv: RFC 4180, one row for each attempt in the order they were
// saved, times after RFC 3339, readings in named columns with their unit in the header.
// Numbers are in SI units with all their digits. The store is the record: the log can be
// written again from it at any time, byte for byte.
type YieldLog struct {
	Store *Store
}

// yieldColumns come before the readings'.
var yieldColumns = []string{"attempt", "lot", "serial", "number", "started", "ended", "station", "nest", "operator", "verdict", "reason"}

// Path is the log's file.
func (y YieldLog) Path(lot string) string {
	return filepath.Join(y.Store.Dir(), "lots", SafeName(lot), "yield.csv")
}

// Append adds an attempt that was just saved. Where the log is missing, torn, or has not
// the columns the attempt needs, it is written again from the store; a torn one is kept
// aside first. The second result says so in a sentence, or is empty.
func (y YieldLog) Append(ctx context.Context, a *Attempt) (note string, err error) {
	path := y.Path(a.Lot)
	data, err := os.ReadFile(path)
	switch {
	case errors.Is(err, os.ErrNotExist):
		return "", y.Rebuild(ctx, a.Lot)
	case err != nil:
		return "", fmt.Errorf("the yield log cannot be read: %w", err)
	}
	header, rows, whole := readLog(data)
	if !whole {
		aside, err := WriteNew(path+".torn", data)
		if err != nil {
			return "", err
		}
		return fmt.Sprintf("the yield log was torn: it is kept as %s and was written again from the store", aside), y.Rebuild(ctx, a.Lot)
	}
	if bytes.Contains(data, []byte("\r\n"+a.ID+",")) {
		return "", nil // it came in when the log was written again after a later attempt
	}
	for _, r := range a.Readings {
		if !r.Curve && !has(header, columnOf(r)) {
			return "", y.Rebuild(ctx, a.Lot)
		}
	}
	if rows != a.position(ctx, y.Store) {
		return "the yield log lacked attempts: it was written again from the store", y.Rebuild(ctx, a.Lot)
	}
	f, err := os.OpenFile(path, os.O_APPEND|os.O_WRONLY, 0o644)
	if err != nil {
		return "", fmt.Errorf("the yield log cannot be written: %w", err)
	}
	_, err = f.Write(csvRow(rowOf(header, a)))
	return "", errors.Join(err, f.Sync(), f.Close())
}

// position is how many attempts of its lot were saved before this one.
func (a *Attempt) position(ctx context.Context, s *Store) int {
	var n int
	if err := s.db.QueryRowContext(ctx, "SELECT COUNT(*) FROM attempts WHERE lot = ? AND (started, id) < (?, ?)", a.Lot, a.Started.UTC().Format(time.RFC3339Nano), a.ID).Scan(&n); err != nil {
		return -1
	}
	return n
}

// Rebuild writes the log again from the store.
func (y YieldLog) Rebuild(ctx context.Context, lot string) error {
	units := map[string]bool{}
	if err := y.Store.Attempts(ctx, Filter{Lot: lot}, func(a *Attempt) bool {
		for _, r := range a.Readings {
			if !r.Curve {
				units[columnOf(r)] = true
			}
		}
		return true
	}); err != nil {
		return err
	}
	readings := make([]string, 0, len(units))
	for u := range units {
		readings = append(readings, u)
	}
	sort.Strings(readings)
	header := append([]string(nil), yieldColumns...)
	for _, u := range readings {
		header = append(header, u, "U of "+u)
	}
	var out bytes.Buffer
	out.Write(csvRow(header))
	if err := y.Store.Attempts(ctx, Filter{Lot: lot}, func(a *Attempt) bool {
		out.Write(csvRow(rowOf(header, a)))
		return true
	}); err != nil {
		return err
	}
	path := y.Path(lot)
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return fmt.Errorf("the lot's folder cannot be made: %w", err)
	}
	return WriteFile(path, out.Bytes())
}

func columnOf(r Judged) string { return r.Name + " (" + r.Unit + ")" }

func has(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
}

func rowOf(header []string, a *Attempt) []string {
	row := make([]string, len(header))
	copy(row, []string{a.ID, a.Lot, a.Serial, strconv.Itoa(a.Number), a.Started.UTC().Format(time.RFC3339Nano), a.Ended.UTC().Format(time.RFC3339Nano),
		a.Station, a.Nest, a.Operator, string(a.Verdict), a.Reason})
	at := map[string]int{}
	for i, h := range header {
		at[h] = i
	}
	for _, r := range a.Readings {
		i, ok := at[columnOf(r)]
		if !ok || r.Void != nil || r.Missing != "" {
			continue
		}
		row[i] = strconv.FormatFloat(r.Value, 'g', -1, 64)
		row[i+1] = strconv.FormatFloat(r.Budget.Expanded, 'g', -1, 64)
	}
	return row
}

func csvRow(fields []string) []byte {
	var b bytes.Buffer
	w := csv.NewWriter(&b)
	w.UseCRLF = true
	_ = w.Write(fields) // a bytes.Buffer does not fail
	w.Flush()
	return b.Bytes()
}

// readLog gives the header and the number of rows, and whether the log ends with a whole
// row.
func readLog(data []byte) (header []string, rows int, whole bool) {
	if !bytes.HasSuffix(data, []byte("\r\n")) {
		return nil, 0, false
	}
	r := csv.NewReader(bytes.NewReader(data))
	all, err := r.ReadAll()
	if err != nil || len(all) == 0 || len(all[0]) < len(yieldColumns) || all[0][0] != yieldColumns[0] {
		return nil, 0, false
	}
	return all[0], len(all) - 1, true
}
