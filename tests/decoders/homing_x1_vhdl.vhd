-- The homing count of homing_x1.sv, in VHDL, with an integer count and a boolean reset; forward is B before A.
library ieee;
use ieee.std_logic_1164.all;

entity homing_x1_vhdl is
  generic (TOP : natural := 90; FIRST : natural := 40);
  port (
    clk  : in std_logic;
    rst  : in boolean;
    a, b : in bit;
    home : in std_ulogic;
    slot : out integer range 0 to 127;
    dir  : out boolean
  );
end entity;

architecture rtl of homing_x1_vhdl is
  type sample is record
    home : std_ulogic;
    a, b : bit;
  end record;
  signal meta, now_seen, last : sample;
  signal gate, gate_last : boolean;
  signal value : integer range 0 to 127;
begin
  gate <= now_seen.home = '1' and now_seen.b = '0';
  slot <= value;

  process (clk)
    variable inc, dec : boolean;
  begin
    if rising_edge(clk) then
      inc := now_seen.a = '1' and last.a = '1' and now_seen.b = '0' and last.b = '1';
      dec := now_seen.a = '1' and last.a = '1' and now_seen.b = '1' and last.b = '0';
      meta <= (home, a, b);
      now_seen <= meta;
      last <= now_seen;
      gate_last <= gate;
      if rst then
        value <= FIRST;
        dir <= false;
      else
        if inc and value < TOP then
          value <= value + 1;
        end if;
        if dec and value > 0 then
          value <= value - 1;
        end if;
        if inc or dec then
          dir <= inc;
        end if;
        if gate and not gate_last then
          value <= 0;
        end if;
      end if;
    end if;
  end process;
end architecture;
