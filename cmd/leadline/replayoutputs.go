package main

import (
	"errors"
	"fmt"
	"strconv"
	"time"

	"leadline/engine/sensor"
	"leadline/engine/study/replay"
	"leadline/engine/study/sweep"
)

// outputs adds what is to be written beside scores and tracks.
func (o *replayOptions) outputs(job *sweep.Job) error {
	for _, form := range o.also {
		switch form {
		case "gpx":
			job.GPX = true
		case "parquet":
			job.Parquet = true
		default:
			return fmt.Errorf("--also %q is no form of a track: give gpx or parquet", form)
		}
	}
	if len(o.also) > 0 && o.dir == "" {
		return errors.New("--also needs --out, where tracks are written")
	}
	for _, text := range o.beliefAt {
		m, err := moment(text)
		if err != nil {
			return err
		}
		job.Beliefs = append(job.Beliefs, m)
	}
	if len(o.beliefAt) > 0 && o.dir == "" {
		return errors.New("--belief-at needs --out, where beliefs are written")
	}
	return nil
}

// moment reads a time of --belief-at.
func moment(text string) (replay.Moment, error) {
	if s, err := strconv.ParseFloat(text, 64); err == nil && s >= 0 && s <= 1e9 {
		return replay.Moment{AfterS: s}, nil
	}
	t, err := time.Parse(time.RFC3339Nano, text)
	if err != nil || t.Unix() < 1 || t.Year() > 2261 {
		return replay.Moment{}, fmt.Errorf("--belief-at is %q: give a time such as 2030-05-01T12:00:05.5Z, or seconds after the first measurement, such as 5.5", text)
	}
	return replay.Moment{At: sensor.Time(t.UnixNano())}, nil
}
