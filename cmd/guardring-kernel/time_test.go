package main_test

import "time"

func sleepShort() { time.Sleep(10 * time.Millisecond) }
